"""Subjets of a fat jet: splitting scales, W candidate and its helicity angle."""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import NDArray

from toprecon.boosted.options import WChoice
from toprecon.jets import History, durham_distance
from toprecon.kinematics import angle, mass, to_rest_frame

FloatArray = NDArray[np.float64]

_PAIRS = ((0, 1), (0, 2), (1, 2))


@dataclasses.dataclass(frozen=True)
class WCandidate:
    """The W among three subjets.

    Parameters
    ----------
    p4 : array, shape (4, F)
        Momentum of the pair [GeV]; NaN with fewer than three subjets.
    mass : array, shape (F,)
        Its mass [GeV].
    helicity : array, shape (F,)
        Cosine of the W helicity angle.
    b_p4 : array, shape (4, F)
        Momentum of the third subjet [GeV].
    """

    p4: FloatArray
    mass: FloatArray
    helicity: FloatArray
    b_p4: FloatArray


def splitting_scale(history: History, n: int) -> FloatArray:
    """Square root of the kT distance at which n + 1 subjets become n.

    sqrt(d_12) (n = 1) is near half the top mass and sqrt(d_23) (n = 2) near half the W
    mass for a top, with d_ij = 2 min(E_i^2, E_j^2)(1 - cos theta_ij).

    Parameters
    ----------
    history : History
        Durham trees of the jets.
    n : int
        Subjets left after the merging.

    Returns
    -------
    array, shape (F,)
        Scale [GeV]; 0 for fewer than n + 1 particles.

    References
    ----------
    J. M. Butterworth, B. E. Cox, J. R. Forshaw, Phys. Rev. D 65 (2002) 096014,
    arXiv:hep-ph/0201098, with the e+e- distance of Catani et al.,
    Phys. Lett. B 269 (1991) 432.
    """
    return np.sqrt(history.merging_scale(n))


def w_candidate(
    subjets: FloatArray,
    *,
    choice: WChoice = WChoice.CLOSEST,
    w_mass: float = 80.379,
) -> WCandidate:
    """Choose the W among three subjets.

    Parameters
    ----------
    subjets : array, shape (4, F, 3)
        Momenta of three subjets [GeV]; energy 0 for a missing one.
    choice : WChoice
        Mass closest to ``w_mass``, smallest mass, or the pair with the smallest Durham
        distance.
    w_mass : float
        W mass [GeV].

    Returns
    -------
    WCandidate
        NaN where a subjet is missing.

    Notes
    -----
    Helicity angle: in the rest frame of the W, between the flight direction of the top
    and the subjet of the W that has the lower energy in the laboratory. A splitting
    of soft radiation lies near +1 or -1, a W decay is spread out.

    References
    ----------
    D. E. Kaplan, K. Rehermann, M. D. Schwartz, B. Tweedie, Phys. Rev. Lett. 101 (2008)
    142001, arXiv:0806.0848 (pair closest to the W mass; helicity angle).
    """
    sums = np.stack([subjets[:, :, i] + subjets[:, :, j] for i, j in _PAIRS])
    masses = np.stack([mass(p) for p in sums])
    if choice == WChoice.CLOSEST:
        cost = np.abs(masses - w_mass)
    elif choice == WChoice.SMALLEST:
        cost = masses
    else:
        cost = np.stack(
            [durham_distance(subjets[:, :, i], subjets[:, :, j]) for i, j in _PAIRS]
        )
    best = cost.argmin(axis=0)
    row = np.arange(subjets.shape[1])
    complete = (subjets[0] > 0).all(axis=1)
    pairs, third = np.array(_PAIRS), np.array([2, 1, 0])
    w = sums[best, :, row].T
    one, other = subjets[:, row, pairs[best, 0]], subjets[:, row, pairs[best, 1]]
    softer = np.where(one[0] < other[0], one, other)
    top = subjets.sum(axis=2)
    with np.errstate(invalid="ignore", divide="ignore"):
        cosine = np.cos(angle(to_rest_frame(softer, w), to_rest_frame(top, w)))
    return WCandidate(
        p4=np.where(complete, w, np.nan),
        mass=np.where(complete, masses[best, row], np.nan),
        helicity=np.where(complete, cosine, np.nan),
        b_p4=np.where(complete, subjets[:, row, third[best]], np.nan),
    )
