"""Lorentz arithmetic on plain arrays.

A momentum is an array of shape (4, ...) with the components E, px, py, pz first
[GeV], so that ``E, px, py, pz = p`` unpacks it and every component is contiguous.
Sums and differences of momenta are sums and differences of such arrays. Records of
the ``vector`` package are for users; kernels use these functions.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]


def minkowski(p: ArrayLike, q: ArrayLike) -> FloatArray:
    """Return the Minkowski product E_p E_q - p.q of momenta, shape (...) [GeV^2]."""
    p, q = np.asarray(p), np.asarray(q)
    return p[0] * q[0] - p[1] * q[1] - p[2] * q[2] - p[3] * q[3]


def mass(p: ArrayLike) -> FloatArray:
    """Return the invariant mass [GeV]; a negative mass squared gives 0."""
    return np.sqrt(np.maximum(minkowski(p, p), 0.0))


def momentum(p: ArrayLike) -> FloatArray:
    """Return the absolute value of the three-momentum [GeV]."""
    p = np.asarray(p)
    return np.sqrt(p[1] ** 2 + p[2] ** 2 + p[3] ** 2)


def transverse_momentum(p: ArrayLike) -> FloatArray:
    """Return the momentum transverse to the beam [GeV]."""
    p = np.asarray(p)
    return np.hypot(p[1], p[2])


def cos_theta(p: ArrayLike) -> FloatArray:
    """Return the cosine of the polar angle to the electron beam (+z).

    Returns
    -------
    array, shape (...)
        In [-1, 1]; NaN for a momentum at rest or with a NaN component.
    """
    p = np.asarray(p, dtype=np.float64)
    size = momentum(p)
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.where(size > 0, p[3] / size, np.nan)


def angle(p: ArrayLike, q: ArrayLike) -> FloatArray:
    """Return the opening angle of two momenta.

    Returns
    -------
    array, shape (...)
        In [0, pi] rad; NaN for a momentum at rest.

    Notes
    -----
    The form atan2(|p x q|, p.q) keeps its precision for nearly parallel momenta.
    """
    p, q = np.asarray(p, dtype=np.float64), np.asarray(q, dtype=np.float64)
    cross = np.sqrt(
        (p[2] * q[3] - p[3] * q[2]) ** 2
        + (p[3] * q[1] - p[1] * q[3]) ** 2
        + (p[1] * q[2] - p[2] * q[1]) ** 2
    )
    dot = p[1] * q[1] + p[2] * q[2] + p[3] * q[3]
    result = np.arctan2(cross, dot)
    return np.where((momentum(p) > 0) & (momentum(q) > 0), result, np.nan)


def boost(p: ArrayLike, velocity: ArrayLike) -> FloatArray:
    """Return momenta seen after a boost with a velocity.

    Parameters
    ----------
    p : array, shape (4, ...)
        Momenta [GeV].
    velocity : array, shape (3, ...)
        Velocity in units of c, with which a particle at rest moves afterwards.

    Returns
    -------
    array, shape (4, ...)
        Boosted momenta; NaN where the velocity is not below 1.

    Notes
    -----
    Written with gamma^2/(1 + gamma), which is finite for a vanishing velocity.
    """
    p = np.asarray(p, dtype=np.float64)
    v = np.asarray(velocity, dtype=np.float64)
    v2 = v[0] ** 2 + v[1] ** 2 + v[2] ** 2
    with np.errstate(invalid="ignore", divide="ignore"):
        gamma = 1.0 / np.sqrt(np.where(v2 < 1, 1.0 - v2, np.nan))
    along = v[0] * p[1] + v[1] * p[2] + v[2] * p[3]
    factor = gamma**2 / (1.0 + gamma) * along + gamma * p[0]
    return np.stack(
        [
            gamma * (p[0] + along),
            p[1] + factor * v[0],
            p[2] + factor * v[1],
            p[3] + factor * v[2],
        ]
    )


def velocity(p: ArrayLike) -> FloatArray:
    """Return the velocity vector p/E, shape (3, ...)."""
    p = np.asarray(p, dtype=np.float64)
    return p[1:] / p[0]


def to_rest_frame(p: ArrayLike, system: ArrayLike) -> FloatArray:
    """Return momenta in the rest frame of a system, shape (4, ...) [GeV]."""
    return boost(p, -velocity(system))


def from_rest_frame(p: ArrayLike, system: ArrayLike) -> FloatArray:
    """Return momenta given in the rest frame of a system in the frame of the system."""
    return boost(p, velocity(system))


def decay_momentum(
    parent: ArrayLike, first: ArrayLike, second: ArrayLike
) -> FloatArray:
    """Return the momentum of both products in the rest frame of a two-body decay.

    Parameters
    ----------
    parent, first, second : array, broadcastable
        Masses [GeV].

    Returns
    -------
    array
        Momentum [GeV]; 0 where the decay is closed.

    Notes
    -----
    sqrt{[M^2-(m1+m2)^2][M^2-(m1-m2)^2]}/(2M), the two-body formula of every textbook
    (Review of Particle Physics, kinematics section).
    """
    M, m1, m2 = np.asarray(parent), np.asarray(first), np.asarray(second)
    product = (M**2 - (m1 + m2) ** 2) * (M**2 - (m1 - m2) ** 2)
    return np.sqrt(np.maximum(product, 0.0)) / (2.0 * M)


def from_pt_eta_phi_mass(
    pt: ArrayLike, eta: ArrayLike, phi: ArrayLike, m: ArrayLike
) -> FloatArray:
    """Return momenta of shape (4, ...) from transverse momentum, eta, phi and mass."""
    pt, eta, phi, m = (np.asarray(x, dtype=np.float64) for x in (pt, eta, phi, m))
    px, py, pz = pt * np.cos(phi), pt * np.sin(phi), pt * np.sinh(eta)
    return np.stack([np.sqrt(px**2 + py**2 + pz**2 + m**2), px, py, pz])
