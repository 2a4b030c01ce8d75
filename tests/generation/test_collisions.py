"""Energies of the beams and the rate of pairs."""

from __future__ import annotations

import numpy as np
import pytest

from tests.generation.conftest import plain
from toprecon.generation import GenerationOptions, pair_cross_section_with_radiation
from toprecon.generation.collisions import (
    cross_section_envelope,
    draw_collisions,
    draw_kept_fraction,
)
from toprecon.treelevel import FormFactors, cross_section
from toprecon.treelevel.radiation import mean_kept_fraction, radiation_exponent


def test_beams_keep_the_mean_fraction_of_leading_logarithms():
    # exact in leading logarithms: <x> = exp(-beta/3); second order: 0.95971
    options = GenerationOptions(energy_spread=0.0)
    kept = draw_kept_fraction(np.random.default_rng(1), 400_000, options)
    error = 5 * np.std(kept) / np.sqrt(len(kept))  # 5 sigma, fixed seed
    assert np.mean(kept) == pytest.approx(0.95971, abs=error)
    expected = mean_kept_fraction(radiation_exponent(500.0))
    assert np.mean(kept) == pytest.approx(expected, abs=error + 5e-5)
    # evaluated independently
    assert np.mean(kept > 0.99) == pytest.approx(0.785, abs=5 * 0.41 / 632 + 5e-4)


def test_energy_spread_is_gaussian():
    options = GenerationOptions(radiation=False, energy_spread=0.002)
    kept = draw_kept_fraction(np.random.default_rng(1), 100_000, options)
    assert np.std(kept) == pytest.approx(0.002, rel=0.012)
    assert np.mean(kept) == pytest.approx(1.0, abs=5 * 0.002 / 316)


@pytest.mark.parametrize(
    "settings",
    [
        {},
        {"helicity": "RL", "finite_widths": False},
        {"helicity": "MIXED", "electron_polarisation": -0.8},
        {"sqrt_s": 380.0},
        {"sqrt_s": 1500.0, "minimum_sqrt_s_prime": 1000.0},
        {"sqrt_s": 3000.0},
        {"form_factors": FormFactors(f2v_z=0.3)},
    ],
)
def test_cross_section_is_the_rate_of_accepted_collisions(settings):
    options = GenerationOptions(**settings)
    collisions = draw_collisions(np.random.default_rng(2), 20_000, options)
    envelope = cross_section_envelope(options)
    left, right = (pair_cross_section_with_radiation(options, s) for s in (-1, 1))
    expected = (1 - envelope.right_share) * left + envelope.right_share * right
    rate = envelope.largest * collisions.acceptance
    # 5 sigma of a rate counted from 20 000 pairs, fixed seed
    assert rate == pytest.approx(expected, rel=5 / 141)


def test_without_radiation_and_widths_the_cross_section_is_that_of_tree_level():
    for helicity, sign in (("LR", -1), ("RL", 1)):
        value = pair_cross_section_with_radiation(plain(helicity), sign)
        assert value == pytest.approx(float(cross_section(500, sign)), rel=2e-5)


def test_radiation_changes_the_cross_section_as_known():
    # evaluated independently: 910 and 460 fb for (-0.8, +0.3) and (+0.8, -0.3)
    options = GenerationOptions(energy_spread=0.0, finite_widths=False)
    left, right = (pair_cross_section_with_radiation(options, s) for s in (-1, 1))
    assert 0.585 * left + 0.035 * right == pytest.approx(910, rel=0.006)
    assert 0.035 * left + 0.585 * right == pytest.approx(460, rel=0.006)


def test_limit_of_the_rejection_holds():
    for options in (
        GenerationOptions(),
        GenerationOptions(sqrt_s=380.0, helicity="RL"),
        GenerationOptions(sqrt_s=1500.0, form_factors=FormFactors(f2v_photon=0.1)),
    ):
        from toprecon.generation.collisions import cross_section_at_masses
        from toprecon.generation.masses import draw_masses

        rng = np.random.default_rng(3)
        sign = int(options.helicity)
        energy = np.sort(rng.uniform(310, options.sqrt_s, 40_000))
        top, antitop = (
            draw_masses(rng, 40_000, options.inputs, finite_widths=True)[0]
            for _ in range(2)
        )
        sigma = cross_section_at_masses(energy, top, antitop, sign, options)
        bound = cross_section_envelope(options).at(energy, np.full(40_000, float(sign)))
        assert np.all(sigma <= bound)


def test_minimum_mass_of_the_pair_is_respected():
    options = GenerationOptions(sqrt_s=1500.0, minimum_sqrt_s_prime=1200.0)
    hard = draw_collisions(np.random.default_rng(2), 5_000, options)
    assert np.min(2 * np.sqrt(hard.electron * hard.positron)) >= 1200.0


def test_mixed_beams_make_pairs_of_both_helicities_by_cross_section():
    options = GenerationOptions(helicity="MIXED")
    hard = draw_collisions(np.random.default_rng(2), 40_000, options)
    left, right = (pair_cross_section_with_radiation(options, s) for s in (-1, 1))
    assert np.mean(hard.eta > 0) == pytest.approx(
        right / (left + right), abs=5 * 0.47 / 200
    )
