"""Energies of the colliding electron and positron, and the masses of the pair.

Beams lose energy by a Gaussian spread and by photons along the beam; pairs are kept
in proportion to the cross section at the energy left.
"""

from __future__ import annotations

import dataclasses
import functools
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from toprecon.events import Helicity
from toprecon.generation.masses import draw_masses, mass_nodes, mass_window
from toprecon.generation.options import GenerationOptions
from toprecon.generation.spin import pair_cross_section, spin_couplings
from toprecon.treelevel import Vertex, beam_fractions, vertex
from toprecon.treelevel.radiation import (
    largest_radiation_weight,
    radiation_exponent,
    radiation_weight,
)

FloatArray = NDArray[np.float64]
ENVELOPE_MARGIN = 1.02  # between the points of the table the curve may be higher


@dataclasses.dataclass(frozen=True)
class Collisions:
    """Accepted collisions, arrays of shape (E,)."""

    acceptance: float  # share of the collisions tried that made a pair
    electron: FloatArray  # energy that enters the collision [GeV]
    positron: FloatArray
    eta: FloatArray  # sign of the electron's helicity
    top_mass: FloatArray
    antitop_mass: FloatArray
    w_plus_mass: FloatArray
    w_minus_mass: FloatArray


def draw_collisions(
    rng: np.random.Generator, n: int, options: GenerationOptions
) -> Collisions:
    """Draw collisions that make a pair.

    Parameters
    ----------
    rng : numpy.random.Generator
        Random numbers.
    n : int
        Number of pairs.
    options : GenerationOptions
        Beams, couplings, masses.

    Returns
    -------
    Collisions
        Unweighted.
    """
    envelope = cross_section_envelope(options)
    nominal = options.sqrt_s / 2
    parts: list[tuple[FloatArray, ...]] = []
    found = tried = 0
    while found < n:
        tries = int(1.1 * (n - found) / envelope.efficiency) + 64
        tried += tries
        electron = nominal * draw_kept_fraction(rng, tries, options)
        positron = nominal * draw_kept_fraction(rng, tries, options)
        energy = 2 * np.sqrt(electron * positron)
        u, choice = rng.random((2, tries))
        eta = np.where(choice < envelope.right_share, 1.0, -1.0)
        bound = envelope.at(energy, eta)
        keep = np.flatnonzero(u * envelope.largest < bound)
        keep = keep[energy[keep] >= options.minimum_sqrt_s_prime]
        masses = [
            draw_masses(
                rng, len(keep), options.inputs, finite_widths=options.finite_widths
            )
            for _ in range(2)
        ]
        (top, w_plus), (antitop, w_minus) = masses
        sigma = np.zeros(len(keep))
        for sign in (-1, 1):
            rows = eta[keep] == sign
            if rows.any():
                sigma[rows] = cross_section_at_masses(
                    energy[keep][rows], top[rows], antitop[rows], sign, options
                )
        inner = rng.random(len(keep)) * bound[keep] < sigma
        rows = keep[inner]
        found += len(rows)
        parts.append(
            (
                electron[rows],
                positron[rows],
                eta[rows],
                top[inner],
                antitop[inner],
                w_plus[inner],
                w_minus[inner],
            )
        )
    columns = [np.concatenate(column)[:n] for column in zip(*parts, strict=True)]
    return Collisions(found / tried, *columns)


def draw_kept_fraction(
    rng: np.random.Generator, n: int, options: GenerationOptions
) -> FloatArray:
    """Draw the energies of n beam particles over the nominal one, shape (n,)."""
    kept = np.ones(n)
    if options.radiation:
        exponent = radiation_exponent(options.sqrt_s)
        largest = largest_radiation_weight(exponent)
        filled = 0
        while filled < n:
            u, v = rng.random((2, int(1.1 * (n - filled)) + 32))
            loss = u ** (2 / exponent)
            good = loss[v * largest < radiation_weight(loss, exponent)][: n - filled]
            kept[filled : filled + len(good)] = 1 - good
            filled += len(good)
    if options.energy_spread > 0:
        kept *= 1 + options.energy_spread * rng.standard_normal(n)
    return kept


class Envelope(NamedTuple):
    """Upper limit of the cross section as a function of the energy, per helicity."""

    energy: FloatArray
    left: FloatArray
    right: FloatArray
    largest: float
    right_share: float
    efficiency: float

    def at(self, energy: FloatArray, eta: FloatArray) -> FloatArray:
        """Limit [fb]; both helicities are scaled to the same largest value."""
        left = np.interp(energy, self.energy, self.left)
        right = np.interp(energy, self.energy, self.right)
        return np.where(eta > 0, right, left)


@functools.lru_cache(maxsize=32)
def cross_section_envelope(options: GenerationOptions) -> Envelope:
    """Return the limits that the rejection works with."""
    inputs = options.inputs
    low, _ = (
        mass_window(inputs.top_mass, inputs.top_width)
        if options.finite_widths
        else (inputs.top_mass, inputs.top_mass)
    )
    reach = options.sqrt_s * (1 + 8 * options.energy_spread)
    grid = 2 * low + (reach - 2 * low) * np.linspace(0, 1, 600) ** 2
    masses = np.unique(
        [low, *mass_nodes(inputs, finite_widths=options.finite_widths)[0]]
    )
    limits = {}
    for sign in (-1, 1):
        curves = [
            cross_section_at_masses(
                grid, np.full_like(grid, a), np.full_like(grid, b), sign, options
            )
            for i, a in enumerate(masses)
            for b in masses[: i + 1]
        ]
        limit = np.max(curves, axis=0)
        # the curve rises steeply at the threshold: cover the step to the next point
        limit = np.maximum(limit, np.append(limit[1:], limit[-1]))
        limits[sign] = ENVELOPE_MARGIN * limit
    fractions = mixing_fractions(options)
    wanted = grid >= options.minimum_sqrt_s_prime
    wanted[-1] = True
    tops = [float(np.max(limits[sign][wanted])) for sign in (-1, 1)]
    largest = max(top for top, f in zip(tops, fractions, strict=True) if f > 0)
    mean = sum(
        f * float(np.interp(options.sqrt_s, grid, limits[sign]))
        for f, sign in zip(fractions, (-1, 1), strict=True)
    )
    return Envelope(
        grid,
        limits[-1],
        limits[1],
        largest,
        fractions[1],
        max(0.4 * mean / largest, 0.01),
    )


def mixing_fractions(options: GenerationOptions) -> tuple[float, float]:
    """Return the shares of LR and RL collisions among those that count."""
    if options.helicity is Helicity.MIXED:
        left, right = beam_fractions(
            options.electron_polarisation, options.positron_polarisation
        )
        return left / (left + right), right / (left + right)
    return (1.0, 0.0) if options.helicity is Helicity.LR else (0.0, 1.0)


def vertex_for(
    energy: FloatArray, eta: FloatArray, options: GenerationOptions
) -> Vertex:
    """Return the couplings for collisions of either helicity."""
    inputs, factors = options.inputs, options.form_factors
    if options.helicity is not Helicity.MIXED:
        return vertex(energy, int(options.helicity), inputs, factors)
    left = vertex(energy, -1, inputs, factors)
    right = vertex(energy, 1, inputs, factors)
    names = ("vector", "axial", "tensor", "dipole")
    return Vertex(
        **{
            name: np.where(eta > 0, getattr(right, name), getattr(left, name))
            for name in names
        }
    )


def cross_section_at_masses(
    energy: FloatArray,
    top: FloatArray,
    antitop: FloatArray,
    sign: int,
    options: GenerationOptions,
) -> FloatArray:
    """Cross section for one helicity at given masses [fb]."""
    x = vertex(energy, sign, options.inputs, options.form_factors)
    couplings = spin_couplings(x, energy, top, antitop, options.inputs.top_mass)
    return pair_cross_section(couplings, energy, top, antitop, options.inputs)
