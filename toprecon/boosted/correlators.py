"""Energy correlation functions and the ratios C_2 and D_2."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from toprecon.boosted.nsubjettiness import unit_vectors

FloatArray = NDArray[np.float64]

_BLOCK = 400_000
"""Entries of one block of pair matrices, so that they stay in the cache."""


class Correlators(NamedTuple):
    """Energy correlation functions of jets, each of shape (F,).

    With z_i = E_i/E_jet: e2 = sum_{i<j} z_i z_j theta_ij^beta and
    e3 = sum_{i<j<k} z_i z_j z_k (theta_ij theta_ik theta_jk)^beta, so ECF(1) = 1.
    """

    e2: FloatArray
    e3: FloatArray

    @property
    def c2(self) -> FloatArray:
        """C_2 = ECF(3) ECF(1) / ECF(2)^2 (arXiv:1305.0007, eq. 2.9); NaN if e2 is 0."""
        return _ratio(self.e3, self.e2**2)

    @property
    def d2(self) -> FloatArray:
        """D_2 = ECF(3) ECF(1)^3 / ECF(2)^3 (arXiv:1409.6298, eq. 1.2); NaN if e2 is 0."""
        return _ratio(self.e3, self.e2**3)


def _ratio(a: FloatArray, b: FloatArray) -> FloatArray:
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.where(b > 0, a / b, np.nan)


def energy_correlators(
    p4: ArrayLike, counts: ArrayLike, *, beta: float = 1.0
) -> Correlators:
    """Two- and three-point energy correlation functions of jets.

    Parameters
    ----------
    p4 : array, shape (4, K)
        Momenta of the particles, jet after jet [GeV].
    counts : array of int, shape (F,)
        Particles per jet.
    beta : float
        Exponent of the opening angles.

    Returns
    -------
    Correlators
        ``e2`` and ``e3``, normalised to the energy of the jet; 0 for too few
        particles, NaN for a jet without any.

    Notes
    -----
    The triple sum is half of sum_ij M_ij (M z M)_ij z_i z_j / 3 with M the matrix of
    theta^beta: a product of matrices in place of a loop over triplets.

    References
    ----------
    A. J. Larkoski, G. P. Salam, J. Thaler, JHEP 06 (2013) 108, arXiv:1305.0007,
    eqs. 2.1 and 2.2 (the e+e- form with energies and angles); A. J. Larkoski,
    I. Moult, D. Neill, JHEP 12 (2014) 009, arXiv:1409.6298.
    """
    p4 = np.asarray(p4, dtype=np.float64)
    counts = np.asarray(counts, dtype=np.int64)
    e2 = np.full(len(counts), np.nan)
    e3 = np.full(len(counts), np.nan)
    starts = np.cumsum(counts) - counts
    unit = unit_vectors(p4)
    # jets of like multiplicity together: little padding
    order = np.argsort(counts, kind="stable")
    order = order[counts[order] > 0]
    first = 0
    while first < len(order):
        last = _end_of_block(counts[order], first)
        rows = order[first:last]
        width = int(counts[rows[-1]])
        column = np.arange(width)
        valid = column < counts[rows][:, None]
        index = np.where(valid, starts[rows][:, None] + column, 0)
        energy = np.where(valid, p4[0, index], 0.0)
        total = energy.sum(axis=1, keepdims=True)
        share = np.divide(energy, total, out=np.zeros_like(energy), where=total > 0)
        theta = pair_angles(np.moveaxis(unit[:, index], 0, -1))
        e2[rows], e3[rows] = correlator_sums(share, theta**beta)
        first = last
    return Correlators(e2, e3)


def _end_of_block(counts: NDArray[np.int64], first: int) -> int:
    """End of a block of jets, sorted by multiplicity, that begins at ``first``."""
    entries = np.arange(1, len(counts) - first + 1) * counts[first:] ** 2
    return first + max(1, int(np.searchsorted(entries, _BLOCK, side="right")))


def pair_angles(unit: FloatArray) -> FloatArray:
    """Return opening angles of all pairs, shape (B, P, P), from directions (B, P, 3)."""
    cosine = np.clip(unit @ np.swapaxes(unit, 1, 2), -1.0, 1.0)
    theta = 2.0 * np.arcsin(np.sqrt(0.5 * (1.0 - cosine)))
    diagonal = np.arange(unit.shape[1])
    theta[:, diagonal, diagonal] = 0.0
    return theta


def correlator_sums(
    share: FloatArray, distance: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Sum over pairs and over triplets.

    Parameters
    ----------
    share : array, shape (B, P)
        Shares z_i; 0 for padding.
    distance : array, shape (B, P, P)
        theta_ij^beta, or another distance; 0 on the diagonal.

    Returns
    -------
    e2, e3 : array, shape (B,)
        Sums over i < j and over i < j < k.
    """
    weighted = distance * share[:, None, :]
    e2 = 0.5 * np.einsum("bi,bij->b", share, weighted)
    closed = (weighted @ distance) * distance
    e3 = np.einsum("bi,bij,bj->b", share, closed, share) / 6.0
    return e2, e3
