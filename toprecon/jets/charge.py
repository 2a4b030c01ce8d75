"""Jet charge: what the charges of its particles tell about the quark of a jet."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from toprecon.errors import InputError
from toprecon.jets.history import FloatArray, as_particles


def jet_charge(
    charge: ArrayLike,
    p4: ArrayLike,
    jet_index: ArrayLike,
    kappa: float,
    *,
    counts: ArrayLike,
    jet_counts: ArrayLike,
) -> FloatArray:
    """Energy-weighted charge of every jet.

    Q = sum_i q_i (E_i / E_jet)^kappa over the particles of the jet, with E_jet their
    summed energy. kappa = 0 counts charges, a large kappa trusts the leading particle.

    Parameters
    ----------
    charge : array, shape (N,)
        Charges of the particles in units of the positron's.
    p4 : array, shape (4, N)
        Momenta E, px, py, pz, event after event [GeV].
    jet_index : array of int, shape (N,)
        Jet within its event; -1 for none.
    kappa : float
        Exponent of the energy share.
    counts : array of int, shape (E,)
        Particles per event.
    jet_counts : array of int, shape (E,)
        Jets per event.

    Returns
    -------
    array, shape (J,)
        Charges of all jets, event after event; 0 for a jet without particles.

    Raises
    ------
    InputError
        If the arrays have different lengths or a jet index is out of range.

    References
    ----------
    R. D. Field, R. P. Feynman, Nucl. Phys. B 136 (1978) 1; D. Krohn, M. D. Schwartz,
    T. Lin, W. J. Waalewijn, Phys. Rev. Lett. 110 (2013) 212001, eq. 1 (with energies
    in place of transverse momenta).
    """
    p4, counts = as_particles(p4, counts)
    charge = np.asarray(charge, dtype=np.float64)
    label = np.asarray(jet_index, dtype=np.int64)
    jet_counts = np.asarray(jet_counts, dtype=np.int64)
    n = p4.shape[1]
    if len(charge) != n or len(label) != n or len(jet_counts) != len(counts):
        msg = (
            "jet charge: one charge and one jet index per particle and one number of "
            f"jets per event are required; got {len(charge)}, {len(label)} for {n} "
            f"particles and {len(jet_counts)} for {len(counts)} events"
        )
        raise InputError(msg)
    event = np.repeat(np.arange(len(counts)), counts)
    if np.any(label < -1) or np.any(label >= jet_counts[event]):
        msg = (
            "jet charge: a jet index must be -1 or below the number of jets of its "
            f"event; got {int(label.min())} .. {int(label.max())}"
        )
        raise InputError(msg)
    total = int(jet_counts.sum())
    first = np.cumsum(jet_counts) - jet_counts
    slot = np.where(label >= 0, first[event] + label, total)
    energy = np.bincount(slot, weights=p4[0], minlength=total + 1)
    # a jet of particles without energy has no shares
    share = np.divide(
        p4[0], energy[slot], out=np.zeros_like(p4[0]), where=energy[slot] > 0
    )
    weighted = charge * share**kappa
    sums = np.bincount(slot, weights=weighted, minlength=total + 1).astype(np.float64)
    return sums[:total]
