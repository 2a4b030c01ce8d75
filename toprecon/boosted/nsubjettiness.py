"""N-subjettiness: how well N axes describe the energy flow in a jet."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from toprecon.boosted.options import SubjetAxes
from toprecon.jets import History, Sequence, cluster_history

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

_PASSES = 200
"""Most passes of the minimisation."""

_ACCURACY = 1e-4
"""The minimisation ends when no value falls by more than this share in a pass."""

_SMALLEST_ANGLE = 1e-6
"""Guards the weight theta^(beta - 2) of a particle that lies on an axis [rad]."""


def n_subjettiness(
    p4: ArrayLike,
    counts: ArrayLike,
    n: int,
    *,
    beta: float = 1.0,
    radius: float = math.pi / 2,
    axes: SubjetAxes = SubjetAxes.DURHAM,
    history: History | None = None,
) -> FloatArray:
    """N-subjettiness of jets, with energies and opening angles.

    tau_N = sum_i E_i min_k theta_ik^beta / sum_i E_i R_0^beta over the particles i and
    N axes k. Small if the energy lies along N directions.

    Parameters
    ----------
    p4 : array, shape (4, K)
        Momenta of the particles, jet after jet [GeV].
    counts : array of int, shape (F,)
        Particles per jet.
    n : int
        Number of axes N.
    beta : float
        Exponent of the angles.
    radius : float
        R_0 [rad].
    axes : SubjetAxes
        ``durham``: directions of the N exclusive Durham jets. ``minimised``: from
        there, axes are moved to the weighted mean of their particles until the sum no
        longer falls.
    history : History, optional
        Durham trees of the same particles, if they are at hand.

    Returns
    -------
    array, shape (F,)
        tau_N, dimensionless; 0 for at most N particles, NaN for a jet without any.

    References
    ----------
    J. Thaler, K. Van Tilburg, JHEP 03 (2011) 015, arXiv:1011.2268, eq. 2.1;
    minimised axes: JHEP 02 (2012) 093, arXiv:1108.2701. The e+e- form takes energies
    and opening angles in place of transverse momenta and distances.
    """
    p4 = np.asarray(p4, dtype=np.float64)
    counts = np.asarray(counts, dtype=np.int64)
    if history is None:
        history = cluster_history(p4, counts, Sequence.DURHAM)
    _, jets, nodes = history.split(n)
    size = np.sqrt(np.sum(jets[1:] ** 2, axis=0))
    with np.errstate(invalid="ignore", divide="ignore"):
        directions = np.nan_to_num(jets[1:] / size)
    owner = np.repeat(np.arange(len(counts)), counts)
    unit = unit_vectors(p4)
    theta = angles_to(unit, directions, nodes, owner)
    tau = spread(p4[0], theta, owner, beta)
    if axes == SubjetAxes.MINIMISED:
        for _ in range(_PASSES):
            directions = _moved(p4[0], unit, theta, directions, owner, beta)
            theta = angles_to(unit, directions, nodes, owner)
            lower = np.fmin(tau, spread(p4[0], theta, owner, beta))
            falls = lower < (1.0 - _ACCURACY) * tau
            tau = lower
            if not falls.any():
                break
    energy = np.bincount(owner, weights=p4[0], minlength=len(counts))
    full = np.full(len(counts), np.nan)
    full[: len(tau)] = tau
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.where(counts > 0, full / (energy * radius**beta), np.nan)


def unit_vectors(p4: FloatArray) -> FloatArray:
    """Return directions, shape (3, K); 0 for a momentum at rest."""
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.nan_to_num(p4[1:] / np.sqrt(np.sum(p4[1:] ** 2, axis=0)))


def angles_to(
    unit: FloatArray, directions: FloatArray, nodes: IntArray, owner: IntArray
) -> FloatArray:
    """Return angles of particles to the axes of their jet, shape (N, K); inf for none.

    Parameters
    ----------
    unit : array, shape (3, K)
        Directions of the particles.
    directions : array, shape (3, F, N)
        Directions of the axes.
    nodes : array of int, shape (F, N)
        Negative where there is no axis.
    owner : array of int, shape (K,)
        Jet of every particle.

    Returns
    -------
    array, shape (N, K)
        Opening angles [rad].
    """
    out = np.empty((directions.shape[2], len(owner)))
    for k in range(directions.shape[2]):
        half = 0.5 * np.sqrt(np.sum((unit - directions[:, owner, k]) ** 2, axis=0))
        theta = 2.0 * np.arcsin(np.minimum(half, 1.0))
        out[k] = np.where(nodes[owner, k] >= 0, theta, np.inf)
    return out


def spread(
    weight: FloatArray, distance: FloatArray, owner: IntArray, beta: float
) -> FloatArray:
    """Return sum_i w_i min_k d_ik^beta of every jet, not normalised.

    Parameters
    ----------
    weight : array, shape (K,)
        Energies, or any other weight.
    distance : array, shape (N, K)
        Distances of particles to axes.
    owner : array of int, shape (K,)
        Jet of every particle.
    beta : float
        Exponent of the distance.

    Returns
    -------
    array, shape (last jet + 1,)
        The sums.
    """
    nearest = distance.min(axis=0)
    return np.bincount(owner, weights=weight * nearest**beta).astype(np.float64)


def _moved(
    energy: FloatArray,
    unit: FloatArray,
    theta: FloatArray,
    directions: FloatArray,
    owner: IntArray,
    beta: float,
) -> FloatArray:
    """Move every axis to the mean of its particles, weighted with E theta^(beta-2)."""
    n_axes = len(theta)
    n_jets = directions.shape[1]
    mine = theta.argmin(axis=0)
    nearest = np.maximum(theta[mine, np.arange(len(owner))], _SMALLEST_ANGLE)
    weight = energy * nearest ** (beta - 2.0)
    slot = owner * n_axes + mine
    total = n_jets * n_axes
    sums = np.stack(
        [np.bincount(slot, weights=weight * c, minlength=total) for c in unit]
    )
    size = np.sqrt(np.sum(sums**2, axis=0))
    old = directions.reshape(3, total)
    new = np.where(size > 0, sums / np.where(size > 0, size, 1.0), old)
    return new.reshape(directions.shape)
