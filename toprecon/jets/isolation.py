"""How much energy lies around a particle."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.kinematics import momentum


def relative_isolation(
    p: NDArray[np.float64],
    counts: Any,
    candidates: NDArray[np.bool_],
    *,
    cone: float,
) -> NDArray[np.float64]:
    """Return the energy in a cone around particles over their own energy.

    Parameters
    ----------
    p : array, shape (4, N)
        Momenta of all particles, event after event [GeV].
    counts : array of int, shape (E,)
        Particles per event.
    candidates : array of bool, shape (N,)
        Particles to look at.
    cone : float
        Half opening angle [rad].

    Returns
    -------
    array, shape (N,)
        Sum of the energies of the other particles within the cone, divided by the
        energy of the candidate; NaN for other particles. 0 means fully isolated.

    Notes
    -----
    Only pairs of a candidate and a particle of its event are formed. A particle at
    rest has no direction and is in no cone.
    """
    counts = np.asarray(counts, dtype=np.int64)
    starts = np.cumsum(counts) - counts
    event = np.repeat(np.arange(len(counts)), counts)
    chosen = np.flatnonzero(candidates)
    size = counts[event[chosen]]
    first = np.repeat(np.cumsum(size) - size, size)
    other = np.arange(size.sum()) - first + np.repeat(starts[event[chosen]], size)
    mine = np.repeat(chosen, size)
    lengths = momentum(p)
    dot = np.einsum("ij,ij->j", p[1:, mine], p[1:, other])
    product = lengths[mine] * lengths[other]
    inside = (other != mine) & (dot > np.cos(cone) * product) & (product > 0)
    total = np.bincount(
        np.repeat(np.arange(len(chosen)), size),
        np.where(inside, p[0, other], 0.0),
        minlength=len(chosen),
    )
    out = np.full(p.shape[1], np.nan)
    with np.errstate(divide="ignore", invalid="ignore"):
        out[chosen] = total / p[0, chosen]
    return out
