"""Cross section of a sample: the pair cross section over the energies of the beams."""

from __future__ import annotations

import functools

import numpy as np
from numpy.typing import NDArray

from toprecon.events import Helicity, Sample
from toprecon.generation.collisions import cross_section_at_masses
from toprecon.generation.masses import mass_nodes
from toprecon.generation.options import GenerationOptions
from toprecon.treelevel import beam_fractions
from toprecon.treelevel.radiation import radiation_exponent, radiation_weight

FloatArray = NDArray[np.float64]


@functools.lru_cache(maxsize=64)
def pair_cross_section_with_radiation(options: GenerationOptions, sign: int) -> float:
    """Return the cross section of all pairs for pure beams [fb].

    Parameters
    ----------
    options : GenerationOptions
        Energy, radiation, spread, couplings, smallest mass of a pair.
    sign : int
        -1 for e-L e+R, +1 for e-R e+L.

    Returns
    -------
    float
        Integral of the tree-level cross section over the structure functions of both
        beams, their spread and the masses of the tops.
    """
    grid, curve = _mean_cross_section(options, sign)
    nodes, weights = _hermite(options.energy_spread)
    return sum(
        float(share) * _over_radiation(options, grid, curve, options.sqrt_s * scale)
        for scale, share in zip(nodes.tolist(), weights.tolist(), strict=True)
    )


def describe_sample(options: GenerationOptions, n: int) -> Sample:
    """Return the description of n events generated with these options.

    Parameters
    ----------
    options : GenerationOptions
        Settings.
    n : int
        Events.

    Returns
    -------
    Sample
        Cross sections include the branching fraction of the decays generated.
    """
    share = options.branching_fraction
    left = share * pair_cross_section_with_radiation(options, -1)
    right = share * pair_cross_section_with_radiation(options, 1)
    mixed = options.helicity is Helicity.MIXED
    w_left, w_right = beam_fractions(
        options.electron_polarisation, options.positron_polarisation
    )
    return Sample(
        name=options.sample_name,
        helicity=options.helicity,
        sqrt_s=options.sqrt_s,
        cross_section_lr=left,
        cross_section_rl=right,
        cross_section=w_left * left + w_right * right if mixed else float("nan"),
        electron_polarisation=options.electron_polarisation,
        positron_polarisation=options.positron_polarisation,
        generated=n,
        entries=n,
        sum_of_weights=float(n),
    )


def _mean_cross_section(
    options: GenerationOptions, sign: int
) -> tuple[FloatArray, FloatArray]:
    """Cross section averaged over the masses of the tops, on a grid of energies."""
    masses, shares = mass_nodes(
        options.inputs, finite_widths=options.finite_widths, n=16
    )
    low = 2 * float(masses.min())
    high = options.sqrt_s * (1 + 8 * options.energy_spread)
    grid = low + (high - low) * np.linspace(0, 1, 800) ** 2  # dense at the threshold
    curve = np.zeros_like(grid)
    for i in range(len(masses)):
        for j in range(i + 1):
            top, antitop = np.full_like(grid, masses[i]), np.full_like(grid, masses[j])
            sigma = cross_section_at_masses(grid, top, antitop, sign, options)
            # the pair (i, j) stands for (j, i) too
            curve += (2 - (i == j)) * shares[i] * shares[j] * sigma
    return grid, curve


def _over_radiation(
    options: GenerationOptions, grid: FloatArray, curve: FloatArray, sqrt_s: float
) -> float:
    """Integrate over the losses of both beams."""
    if not options.radiation:
        wanted = sqrt_s >= options.minimum_sqrt_s_prime
        return float(np.interp(sqrt_s, grid, curve)) if wanted else 0.0
    exponent = radiation_exponent(options.sqrt_s)
    u = (np.arange(500) + 0.5) / 500  # loss = u^(2/beta) is flat in the soft part
    loss = u ** (2 / exponent)
    weight = radiation_weight(loss, exponent) / len(u)
    kept = np.sqrt(1 - loss)
    energy = sqrt_s * kept[:, None] * kept
    sigma = np.interp(energy, grid, curve, left=0.0)
    sigma[energy < options.minimum_sqrt_s_prime] = 0.0
    return float(weight @ sigma @ weight)


def _hermite(spread: float) -> tuple[FloatArray, FloatArray]:
    """Factors on the collision energy and weights that stand for the beam spread."""
    if spread == 0:
        return np.ones(1), np.ones(1)
    x, w = np.polynomial.hermite_e.hermegauss(5)
    return 1 + spread / np.sqrt(2) * x, w / w.sum()
