"""Decay of polarised tops: momenta of b and of the two fermions in the top frame."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from toprecon.kinematics import decay_momentum

FloatArray = NDArray[np.float64]


class DecayMomenta(NamedTuple):
    """Momenta in the rest frame of the top, each of shape (4, E) [GeV]."""

    b: FloatArray
    up: FloatArray
    down: FloatArray


def decay_tops(
    rng: np.random.Generator,
    top_mass: FloatArray,
    w_mass: FloatArray,
    b_mass: float,
    direction: FloatArray,
) -> DecayMomenta:
    """Decay tops whose charged lepton (or down-type quark) has a given direction.

    At leading order its energy is independent of its direction, which alone carries
    the spin; the rest of the decay has a random azimuth about it.

    Parameters
    ----------
    rng : numpy.random.Generator
        Random numbers.
    top_mass, w_mass : array, shape (E,)
        Masses [GeV].
    b_mass : float
        Mass of the b [GeV].
    direction : array, shape (3, E)
        Unit vector in the top rest frame.

    Returns
    -------
    DecayMomenta
        In the rest frame of the top; fermions from the W are massless.

    References
    ----------
    M. Jezabek, J. H. Kuhn, Nucl. Phys. B320 (1989) 20: energy and angle factorise.
    """
    n = len(top_mass)
    momentum = decay_momentum(top_mass, w_mass, b_mass)
    w_energy = np.sqrt(momentum**2 + w_mass**2)
    c = draw_helicity_angle(rng, top_mass, w_mass, b_mass)
    # the fermion in the top frame, from the helicity angle in the W frame
    energy = (w_energy + momentum * c) / 2
    # m_W^2 / 2 = E E_W - E p cos(angle between fermion and W)
    cosine = np.clip((w_energy - w_mass**2 / (2 * energy)) / momentum, -1.0, 1.0)
    sine = np.sqrt(1 - cosine**2)
    azimuth = 2 * np.pi * rng.random(n)
    first, second = perpendicular(direction)
    w = momentum * (
        cosine * direction + sine * (np.cos(azimuth) * first + np.sin(azimuth) * second)
    )
    down = np.concatenate([energy[None], energy * direction])
    up = np.concatenate([(w_energy - energy)[None], w - down[1:]])
    b = np.concatenate([(top_mass - w_energy)[None], -w])
    return DecayMomenta(b, up, down)


def draw_helicity_angle(
    rng: np.random.Generator, top_mass: FloatArray, w_mass: FloatArray, b_mass: float
) -> FloatArray:
    """Draw the cosine of the helicity angle of the down-type fermion.

    Parameters
    ----------
    rng : numpy.random.Generator
        Random numbers.
    top_mass, w_mass : array, shape (E,)
        Masses [GeV].
    b_mass : float
        Mass of the b [GeV].

    Returns
    -------
    array, shape (E,)
        A mixture of (1 - c)^2, (1 + c)^2 and 1 - c^2 with the shares of left-handed,
        right-handed and longitudinal W bosons at these masses.
    """
    n = len(top_mass)
    x2, y2 = (w_mass / top_mass) ** 2, (b_mass / top_mass) ** 2
    momentum = 2 * decay_momentum(top_mass, w_mass, b_mass) / top_mass
    total = (1 - y2) ** 2 + x2 * (1 - 2 * x2 + y2)
    left = x2 * (1 - x2 + y2 + momentum) / total
    right = x2 * (1 - x2 + y2 - momentum) / total
    u, choice = rng.random((2, n))
    return draw_mixture(u, choice, plus=right, minus=left)


def draw_mixture(
    u: FloatArray, choice: FloatArray, *, plus: FloatArray, minus: FloatArray
) -> FloatArray:
    """Draw a cosine from a mixture of (1 + c)^2, (1 - c)^2 and 1 - c^2.

    Parameters
    ----------
    u, choice : array, shape (E,)
        Uniform random numbers.
    plus, minus : array, shape (E,)
        Shares of the first two components; the rest goes to the third.

    Returns
    -------
    array, shape (E,)
        In [-1, 1].
    """
    edge = 2 * np.cbrt(u) - 1
    # 1 - c^2 has the cumulative (2 + 3c - c^3)/4: the trigonometric root of the cubic
    middle = 2 * np.sin(np.arcsin(2 * u - 1) / 3)
    return np.where(choice < plus, edge, np.where(choice < plus + minus, -edge, middle))


def perpendicular(direction: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return two unit vectors perpendicular to unit vectors, shape (3, E) each."""
    x, y, z = direction
    # the branch-free frame of T. Duff et al., J. Comput. Graph. Tech. 6 (2017) 1
    sign = np.copysign(1.0, z)
    a = -1.0 / (sign + z)
    b = x * y * a
    return (
        np.stack([1 + sign * x * x * a, sign * b, -sign * x]),
        np.stack([b, sign + y * y * a, -y]),
    )
