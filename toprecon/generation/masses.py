"""Masses of top and W, spread by their widths."""

from __future__ import annotations

import functools
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.kinematics import decay_momentum
from toprecon.treelevel import ElectroweakInputs

FloatArray = NDArray[np.float64]
WINDOW = 15.0  # widths on each side; 4 % of a resonance is outside, common practice


def draw_masses(
    rng: np.random.Generator, n: int, inputs: ElectroweakInputs, *, finite_widths: bool
) -> tuple[FloatArray, FloatArray]:
    """Draw the masses of n tops and of the W bosons they decay to.

    Parameters
    ----------
    rng : numpy.random.Generator
        Random numbers.
    n : int
        Number of tops.
    inputs : ElectroweakInputs
        Masses and widths.
    finite_widths : bool
        If false, all masses are the nominal ones.

    Returns
    -------
    tuple of array, shape (n,)
        Masses of top and W [GeV].

    Notes
    -----
    Density in (m_t^2, m_W^2): two Breit-Wigner resonances, times m_t Gamma(t -> W b) at
    these masses, times m_W Gamma(W) ~ m_W^2. Drawn by rejection from the resonances
    alone, within :data:`WINDOW` widths.
    """
    if not finite_widths:
        return np.full(n, inputs.top_mass), np.full(n, inputs.w_mass)
    largest = _largest_factor(inputs)
    tops, ws = np.empty(n), np.empty(n)
    filled = 0
    while filled < n:
        tries = int(2.2 * (n - filled)) + 32
        u = rng.random((3, tries))
        top = _resonance(u[0], inputs.top_mass, inputs.top_width)
        w = _resonance(u[1], inputs.w_mass, inputs.w_width)
        keep = u[2] * largest < decay_factor(top, w, inputs.b_mass)
        taken = min(int(np.count_nonzero(keep)), n - filled)
        tops[filled : filled + taken] = top[keep][:taken]
        ws[filled : filled + taken] = w[keep][:taken]
        filled += taken
    return tops, ws


def mass_window(mass: float, width: float) -> tuple[float, float]:
    """Return the smallest and the largest mass generated [GeV]."""
    reach = min(WINDOW * width, 0.9 * mass)
    return mass - reach, mass + reach


def decay_factor(top: Any, w: Any, b_mass: float) -> FloatArray:
    """Return m_t Gamma(t -> W b) m_W Gamma(W), up to a constant; 0 if closed.

    Parameters
    ----------
    top, w : array
        Masses [GeV].
    b_mass : float
        Mass of the b [GeV].

    Returns
    -------
    array
        (p_b/m_t) [(m_t^2 - m_b^2)^2 + m_W^2 (m_t^2 + m_b^2) - 2 m_W^4], where the open
        decay needs m_t > m_W + m_b.
    """
    t2, w2, b2 = np.asarray(top) ** 2, np.asarray(w) ** 2, b_mass**2
    open_decay = np.asarray(top) > np.asarray(w) + b_mass
    squared = (t2 - b2) ** 2 + w2 * (t2 + b2) - 2 * w2**2
    return np.where(open_decay, decay_momentum(top, w, b_mass) / top * squared, 0.0)


def _resonance(u: FloatArray, mass: float, width: float) -> FloatArray:
    """Draw from a Breit-Wigner in the mass squared, within the window."""
    if width == 0:
        return np.full_like(u, mass)
    low, high = mass_window(mass, width)
    ends = np.arctan((np.array([low, high]) ** 2 - mass**2) / (mass * width))
    angle = ends[0] + u * (ends[1] - ends[0])
    return np.sqrt(mass**2 + mass * width * np.tan(angle))


@functools.lru_cache(maxsize=64)
def _largest_factor(inputs: ElectroweakInputs) -> float:
    """Return an upper limit of the factor in the window."""
    top = np.linspace(*mass_window(inputs.top_mass, inputs.top_width), 200)[:, None]
    w = np.linspace(*mass_window(inputs.w_mass, inputs.w_width), 200)
    # the factor is smooth: between the points it exceeds them by less than 1 %
    return 1.01 * float(np.max(decay_factor(top, w, inputs.b_mass)))


@functools.lru_cache(maxsize=64)
def mass_nodes(
    inputs: ElectroweakInputs, *, finite_widths: bool, n: int = 16
) -> tuple[FloatArray, FloatArray]:
    """Return masses of the top and weights that stand for its distribution.

    Parameters
    ----------
    inputs : ElectroweakInputs
        Masses and widths.
    finite_widths : bool
        If false, one node.
    n : int
        Number of nodes.

    Returns
    -------
    tuple of array, shape (n,)
        Masses [GeV] and weights, sum 1.
    """
    if not finite_widths or inputs.top_width == 0:
        return np.array([inputs.top_mass]), np.array([1.0])
    grid = (np.arange(4000) + 0.5) / 4000
    top = _resonance(grid, inputs.top_mass, inputs.top_width)
    w = _resonance((np.arange(60) + 0.5) / 60, inputs.w_mass, inputs.w_width)
    density = decay_factor(top[:, None], w, inputs.b_mass).sum(axis=1)
    groups = np.array_split(np.arange(len(top)), n)
    weight = np.array([density[g].sum() for g in groups])
    mass = np.array([(density[g] * top[g]).sum() for g in groups]) / weight
    return mass, weight / weight.sum()
