"""Production amplitudes with the spins of both tops, and directions drawn from them.

In the pair frame, with z' along the top, x' in the plane of the beam and the top: the
amplitude for a top with spin along n1 and an antitop whose down-type fermion flies
along n2 (each in its rest frame) is xi(n1)^dagger N xi(n2), xi the two-spinor of a
direction. N is a 2 x 2 matrix per event; production and both decays are thus fully
correlated, interference included.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from toprecon.constants import HBARC2_FB, N_COLOURS
from toprecon.generation.decays import draw_mixture, perpendicular
from toprecon.kinematics import decay_momentum
from toprecon.treelevel import ElectroweakInputs, Vertex

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


class Couplings(NamedTuple):
    """Amplitudes by spin component along z', without the angular factors [GeV]."""

    up_up: ComplexArray
    up_down: ComplexArray
    down_up: ComplexArray
    down_down: ComplexArray


def spin_couplings(
    x: Vertex,
    energy: FloatArray,
    top: FloatArray,
    antitop: FloatArray,
    nominal_mass: float,
) -> Couplings:
    """Return the amplitudes of the spin states of the pair.

    Parameters
    ----------
    x : Vertex
        Couplings at the energies of the pairs.
    energy : array, shape (E,)
        Mass of the pair [GeV].
    top, antitop : array, shape (E,)
        Masses [GeV]; they may differ.
    nominal_mass : float
        Mass in the definition of the tensor couplings [GeV].

    Returns
    -------
    Couplings
        First index the top, second the antitop's counter-spinor.
    """
    momentum = decay_momentum(energy, top, antitop)
    e1, e2 = np.hypot(momentum, top), np.hypot(momentum, antitop)
    p1, p2 = np.sqrt(e1 + momentum), np.sqrt(e2 + momentum)
    m1, m2 = top / p1, antitop / p2  # sqrt(E - p), without cancellation
    left, right = x.vector - x.axial, x.vector + x.axial
    scale = energy / (2 * nominal_mass)
    same, other = x.tensor * scale, 1j * x.dipole * scale
    # top: (left, right) chirality = (m1, p1) for spin up, swapped for spin down;
    # antitop: (p2, m2) and (m2, p2)
    plus, minus = same + other, same - other
    return Couplings(
        left * m1 * p2 + right * p1 * m2 + plus * p1 * p2 + minus * m1 * m2,
        left * m1 * m2 + right * p1 * p2 + plus * p1 * m2 + minus * m1 * p2,
        left * p1 * p2 + right * m1 * m2 + plus * m1 * p2 + minus * p1 * m2,
        left * p1 * m2 + right * m1 * p2 + plus * m1 * m2 + minus * p1 * p2,
    )


def pair_cross_section(
    c: Couplings,
    energy: FloatArray,
    top: FloatArray,
    antitop: FloatArray,
    inputs: ElectroweakInputs,
) -> FloatArray:
    """Return the cross section of pairs with given masses [fb]; 0 if closed."""
    momentum = decay_momentum(energy, top, antitop)
    open_pair = energy > top + antitop
    opposite = np.abs(c.up_down) ** 2 + np.abs(c.down_up) ** 2
    equal = np.abs(c.up_up) ** 2 + np.abs(c.down_down) ** 2
    unit = N_COLOURS * np.pi * inputs.alpha**2 * HBARC2_FB
    sigma = unit * momentum / energy**5 * (8 / 3 * opposite + 4 / 3 * equal)
    return np.where(open_pair, sigma, 0.0)


def draw_production_angle(
    rng: np.random.Generator, c: Couplings, eta: FloatArray
) -> FloatArray:
    """Draw cos(theta) of the top in the pair frame.

    Parameters
    ----------
    rng : numpy.random.Generator
        Random numbers.
    c : Couplings
        Amplitudes of the spin states.
    eta : array, shape (E,)
        Sign of the electron's helicity.

    Returns
    -------
    array, shape (E,)
        In [-1, 1]: spin states (up, down) and (down, up) go with (cos + eta)^2 and
        (cos - eta)^2, the two others with sin^2.
    """
    first = 2 * np.abs(c.up_down) ** 2
    second = 2 * np.abs(c.down_up) ** 2
    third = np.abs(c.up_up) ** 2 + np.abs(c.down_down) ** 2
    total = first + second + third
    u, choice = rng.random((2, len(third)))
    right = eta > 0
    plus = np.where(right, first, second) / total
    minus = np.where(right, second, first) / total
    return draw_mixture(u, choice, plus=plus, minus=minus)


def draw_decay_directions(
    rng: np.random.Generator, c: Couplings, eta: FloatArray, cos_theta: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Draw the directions of both down-type fermions in the rest frames of the tops.

    Parameters
    ----------
    rng : numpy.random.Generator
        Random numbers.
    c : Couplings
        Amplitudes of the spin states.
    eta : array, shape (E,)
        Sign of the electron's helicity.
    cos_theta : array, shape (E,)
        Production angle.

    Returns
    -------
    tuple of array, shape (3, E)
        Unit vectors in the axes x', y', z' for the top and the antitop.
    """
    u = rng.random((4, len(cos_theta)))
    n = amplitude_matrix(c, eta, cos_theta)
    # density matrix of the top alone, N N^dagger
    up = np.abs(n[0]) ** 2 + np.abs(n[1]) ** 2
    down = np.abs(n[2]) ** 2 + np.abs(n[3]) ** 2
    off = n[2] * np.conj(n[0]) + n[3] * np.conj(n[1])
    top = _draw_direction(u[0], u[1], _bloch(up, down, off))
    # the top's direction is known now: its spinor fixes the state of the other
    upper = np.sqrt((1 + top[2]) / 2)
    lower = (top[0] + 1j * top[1]) / np.sqrt(2 * np.maximum(1 + top[2], 1e-300))
    first = np.conj(n[0]) * upper + np.conj(n[2]) * lower
    second = np.conj(n[1]) * upper + np.conj(n[3]) * lower
    polarisation = _bloch(
        np.abs(first) ** 2, np.abs(second) ** 2, second * np.conj(first)
    )
    return top, _draw_direction(u[2], u[3], polarisation)


def amplitude_matrix(
    c: Couplings, eta: FloatArray, cos_theta: FloatArray
) -> tuple[ComplexArray, ComplexArray, ComplexArray, ComplexArray]:
    """Return the elements of N: (up, up), (up, down), (down, up), (down, down)."""
    sine = np.sqrt(np.maximum(1 - cos_theta**2, 0.0))
    return (
        c.up_up * sine,
        c.up_down * (cos_theta + eta),
        c.down_up * (cos_theta - eta),
        -c.down_down * sine,
    )


def _bloch(up: FloatArray, down: FloatArray, off: ComplexArray) -> FloatArray:
    """Polarisation vector of a density matrix with off = rho(down, up), shape (3, E)."""
    total = np.maximum(up + down, 1e-300)
    return np.stack([2 * off.real, 2 * off.imag, up - down]) / total


def _draw_direction(
    u: FloatArray, azimuth: FloatArray, polarisation: FloatArray
) -> FloatArray:
    """Draw n with the density 1 + P.n, shape (3, E)."""
    size = np.sqrt(np.sum(polarisation**2, axis=0))
    axis = polarisation / np.maximum(size, 1e-12)
    axis[2] = np.where(size > 1e-12, axis[2], 1.0)  # unpolarised: any axis will do
    size = np.minimum(size, 1.0)
    # root of c + P c^2/2 = 2u - 1 + P/2, in the form that is stable for small P
    root = np.sqrt(np.maximum((1 - size) ** 2 + 4 * size * u, 0.0))
    cosine = np.clip((size - 2 + 4 * u) / (1 + root), -1.0, 1.0)
    sine = np.sqrt(1 - cosine**2)
    phi = 2 * np.pi * azimuth
    first, second = perpendicular(axis)
    return cosine * axis + sine * (np.cos(phi) * first + np.sin(phi) * second)
