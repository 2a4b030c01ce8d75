"""Generated pairs against the formulas of tree level."""

from __future__ import annotations

import numpy as np
import pytest

from tests.generation.conftest import plain
from toprecon.generation import GenerationOptions
from toprecon.generation.partons import draw_partons
from toprecon.kinematics import (
    boost,
    cos_theta,
    mass,
    minkowski,
    momentum,
    to_rest_frame,
    velocity,
)
from toprecon.treelevel import (
    analysing_power,
    differential_cross_section,
    forward_backward_asymmetry,
    mean_helicity,
    w_helicity_fractions,
)

SIGMAS = 5  # all statistical tests: fixed seed; a new seed fails in 1 of 2 million


def helicity_cosine(product, top):
    """Angle of a product in the top frame to the flight direction of the top."""
    q = to_rest_frame(product, top)
    dot = np.sum(q[1:] * top[1:], axis=0)
    return dot / (momentum(q) * momentum(top))


def test_momenta_are_conserved_and_on_shell(pairs):
    options, partons = pairs
    p = partons.momenta
    total = p["top"] + p["antitop"]
    np.testing.assert_allclose(total[0], 500.0, atol=1e-9)
    np.testing.assert_allclose(total[1:], 0.0, atol=1e-9)
    for top, w, b, up, down in (
        ("top", "w_plus", "b", "w_plus_up", "w_plus_down"),
        ("antitop", "w_minus", "bbar", "w_minus_up", "w_minus_down"),
    ):
        np.testing.assert_allclose(p[top], p[w] + p[b], atol=1e-9)
        np.testing.assert_allclose(p[w], p[up] + p[down], atol=1e-9)
        np.testing.assert_allclose(mass(p[top]), 172.5, atol=1e-8)
        np.testing.assert_allclose(mass(p[w]), 80.379, atol=1e-8)
        np.testing.assert_allclose(mass(p[b]), options.inputs.b_mass, atol=1e-6)
        for name in (up, down):
            np.testing.assert_allclose(minkowski(p[name], p[name]), 0.0, atol=1e-7)


def test_production_angle_follows_the_formula(pairs):
    from scipy.stats import chi2

    options, partons = pairs
    edges = np.linspace(-1, 1, 41)
    counts, _ = np.histogram(cos_theta(partons.momenta["top"]), edges)
    nodes, weights = np.polynomial.legendre.leggauss(4)
    middle, half = (edges[1:] + edges[:-1]) / 2, (edges[1] - edges[0]) / 2
    expected = sum(
        w * differential_cross_section(middle + half * x, 500.0, options.helicity)
        for x, w in zip(nodes, weights, strict=True)
    )
    expected *= counts.sum() / expected.sum()
    distance = np.sum((counts - expected) ** 2 / expected)
    assert chi2.sf(distance, 39) > 5.7e-7  # 5 sigma
    asymmetry = float(forward_backward_asymmetry(500.0, options.helicity))
    observed = np.mean(np.sign(cos_theta(partons.momenta["top"])))
    assert observed == pytest.approx(asymmetry, abs=SIGMAS / np.sqrt(len(partons)))


def test_azimuth_about_the_beam_is_uniform(pairs):
    top = pairs[1].momenta["top"]
    phi = np.arctan2(top[2], top[1])
    n = len(phi)
    assert abs(np.mean(np.cos(phi))) < SIGMAS / np.sqrt(2 * n)
    assert abs(np.mean(np.sin(phi))) < SIGMAS / np.sqrt(2 * n)


def test_w_bosons_have_the_helicity_fractions_of_leading_order(pairs):
    options, partons = pairs
    p = partons.momenta
    f = w_helicity_fractions(172.5, 80.379, options.inputs.b_mass)
    first = (f.right - f.left) / 2
    second = 0.4 * (f.left + f.right) + 0.2 * f.longitudinal
    for top, w, down in (
        ("top", "w_plus", "w_plus_down"),
        ("antitop", "w_minus", "w_minus_down"),
    ):
        in_top = to_rest_frame(p[w], p[top])
        lepton = to_rest_frame(to_rest_frame(p[down], p[top]), in_top)
        c = np.sum(lepton[1:] * in_top[1:], axis=0)
        c /= momentum(lepton) * momentum(in_top)
        n = len(c)
        assert np.mean(c) == pytest.approx(first, abs=SIGMAS * np.std(c) / n**0.5)
        assert np.mean(c**2) == pytest.approx(
            second, abs=SIGMAS * np.std(c**2) / n**0.5
        )


@pytest.mark.parametrize(
    ("name", "product"),
    [("lepton", "w_{}_down"), ("neutrino", "w_{}_up"), ("w", "w_{}"), ("b", "b")],
)
def test_products_analyse_the_spin_of_the_top(pairs, name, product):
    options, partons = pairs
    p = partons.momenta
    polarisation = float(mean_helicity(500.0, options.helicity))
    n = len(partons)
    for top, charge, b in (("top", "plus", "b"), ("antitop", "minus", "bbar")):
        key = b if product == "b" else product.format(charge)
        c = helicity_cosine(p[key], p[top])
        # the antitop has the opposite helicity and the opposite analysing power; the
        # b mass changes the analysing powers by less than 2e-3
        expected = polarisation * analysing_power(name, 172.5, 80.379)
        assert 3 * np.mean(c) == pytest.approx(
            expected, abs=SIGMAS * 3 * np.std(c) / n**0.5 + 2e-3
        )


def test_spins_of_both_tops_are_correlated(pairs):
    # evaluated independently: (opposite - equal helicities)/9 = 0.0722 and 0.0745
    options, partons = pairs
    p = partons.momenta
    product = helicity_cosine(p["w_plus_down"], p["top"]) * helicity_cosine(
        p["w_minus_down"], p["antitop"]
    )
    expected = 0.0722 if options.helicity < 0 else 0.0745
    tolerance = SIGMAS * np.std(product) / len(partons) ** 0.5
    assert np.mean(product) == pytest.approx(expected, abs=tolerance)
    # without the correlation it would be the product of the means
    assert np.mean(product) > 0.02 + 0.05


def swapped_cosine(partons):
    """cos(theta) from the hadronic W and the b of the other side."""
    p = partons.momenta
    plus_is_hadronic = np.abs(partons.pdg["w_plus_down"]) < 10
    pair = np.where(plus_is_hadronic, p["w_plus"] + p["bbar"], p["w_minus"] + p["b"])
    return cos_theta(pair) * np.where(plus_is_hadronic, 1, -1)


@pytest.mark.slow
@pytest.mark.parametrize(
    ("helicity", "swapped", "flipped", "given_forward", "given_backward"),
    [("LR", -0.129, 0.437, 0.501, 0.295), ("RL", 0.352, 0.329, 0.264, 0.511)],
)
def test_swapped_b_jets_distort_the_asymmetry(
    helicity, swapped, flipped, given_forward, given_backward
):
    # evaluated independently with 160 000 to 290 000 events
    options = plain(helicity)
    partons = draw_partons(np.random.default_rng(5), 300_000, options)
    true = cos_theta(partons.momenta["top"])
    wrong = swapped_cosine(partons)
    flips = true * wrong < 0
    observed = np.mean(np.sign(wrong))
    a, b = np.mean(flips[true > 0]), np.mean(flips[true < 0])
    assert observed == pytest.approx(swapped, abs=0.006)
    assert np.mean(flips) == pytest.approx(flipped, abs=0.004)
    assert a == pytest.approx(given_forward, abs=0.006)
    assert b == pytest.approx(given_backward, abs=0.006)
    asymmetry = np.mean(np.sign(true))
    assert asymmetry * (1 - a - b) + b - a == pytest.approx(observed, abs=1e-12)
    # a share of 20 % wrong pairs, evaluated independently
    exact = float(forward_backward_asymmetry(500.0, options.helicity))
    mixed = 0.8 * exact + 0.2 * observed
    assert mixed == pytest.approx(0.280 if helicity == "LR" else 0.447, abs=0.003)


def test_radiation_moves_the_pair_along_the_beam_and_balances():
    options = GenerationOptions(helicity="RL")
    partons = draw_partons(np.random.default_rng(3), 20_000, options)
    total = partons.momenta["top"] + partons.momenta["antitop"]
    electron, positron = partons.lost
    np.testing.assert_allclose(total[0] + electron + positron, 500.0, atol=1e-8)
    np.testing.assert_allclose(total[3] + electron - positron, 0.0, atol=1e-8)
    np.testing.assert_allclose(total[1:3], 0.0, atol=1e-8)


def test_widths_spread_the_masses():
    options = GenerationOptions()
    partons = draw_partons(np.random.default_rng(3), 50_000, options)
    tops = mass(partons.momenta["top"])
    # a Breit-Wigner of this width has half of its events within half a width; the
    # window and the growth of the width with the mass change that by 3 %
    inside = np.mean(np.abs(tops - 172.5) < options.inputs.top_width / 2)
    assert inside == pytest.approx(0.5, abs=0.03)
    ws = mass(partons.momenta["w_minus"])
    inside = np.mean(np.abs(ws - 80.379) < options.inputs.w_width / 2)
    assert inside == pytest.approx(0.5, abs=0.03)
    np.testing.assert_allclose(mass(partons.momenta["bbar"]), 4.78, atol=1e-5)


@pytest.mark.slow
@pytest.mark.parametrize(
    ("polarisations", "lab", "pair"),
    [((-0.8, 0.3), 0.364, 0.370), ((0.8, -0.3), 0.440, 0.445)],
)
def test_radiation_lowers_the_asymmetry_in_the_laboratory(polarisations, lab, pair):
    # evaluated independently, statistical error 0.0016; without radiation the values
    # are 0.385 and 0.461
    electron, positron = polarisations
    options = GenerationOptions(
        helicity="MIXED",
        electron_polarisation=electron,
        positron_polarisation=positron,
        energy_spread=0.0,
    )
    partons = draw_partons(np.random.default_rng(8), 400_000, options)
    top, antitop = partons.momenta["top"], partons.momenta["antitop"]
    in_lab = np.mean(np.sign(cos_theta(top)))
    in_pair = np.mean(np.sign(cos_theta(to_rest_frame(top, top + antitop))))
    # 5 standard deviations of both samples together: 0.0016 (theirs), 0.0015
    assert in_lab == pytest.approx(lab, abs=0.011)
    assert in_pair == pytest.approx(pair, abs=0.011)
    assert in_pair - in_lab == pytest.approx(pair - lab, abs=0.003)


def test_frame_of_the_pair_is_the_boosted_one():
    options = GenerationOptions()
    partons = draw_partons(np.random.default_rng(2), 500, options)
    total = partons.momenta["top"] + partons.momenta["antitop"]
    back = boost(total, -velocity(total))
    np.testing.assert_allclose(back[1:], 0.0, atol=1e-9)


def test_flavours_are_those_asked_for():
    rng = np.random.default_rng(4)
    hadronic = draw_partons(rng, 400, GenerationOptions(decays="all-hadronic"))
    codes = np.stack(list(hadronic.pdg.values()))
    assert np.all(np.abs(codes) <= 4)
    tau = GenerationOptions(decays="dilepton", lepton_flavours=("tau",))
    dilepton = draw_partons(rng, 400, tau)
    assert set(dilepton.pdg["w_plus_down"]) == {-15}
    assert set(dilepton.pdg["w_plus_up"]) == {16}
    assert set(dilepton.pdg["w_minus_down"]) == {15}
    assert set(dilepton.pdg["w_minus_up"]) == {-16}
    everything = GenerationOptions(decays="all", lepton_flavours=("e", "mu", "tau"))
    mixed = draw_partons(rng, 40_000, everything)
    share = np.mean(np.abs(mixed.pdg["w_plus_down"]) < 10)
    # branching fraction of the W to hadrons, Review of Particle Physics: 67.4 %
    assert share == pytest.approx(0.6741, abs=SIGMAS * 0.47 / 200)
