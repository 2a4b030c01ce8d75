"""Response to partons: what was put in is what comes out."""

from __future__ import annotations

import awkward as ak
import numpy as np
import pytest

from toprecon.events import components
from toprecon.generation import GenerationOptions, generate
from toprecon.generation.response import tilt
from toprecon.generation.tags import btag_score, charge_measurement, electric_charge
from toprecon.generation.taus import decay_taus
from toprecon.kinematics import angle, momentum


@pytest.fixture(scope="module")
def events():
    return generate(20_000, seed=21)


def nearest_jet(events, name):
    """Jet index nearest in angle to a parton, and the angle."""
    jets = events.jets
    four = ak.num(jets) == 4
    p = np.stack([np.stack(list(jets[four][c])) for c in ("E", "px", "py", "pz")])
    parton = components(events.truth[name][four])
    angles = angle(p, parton[:, :, None])
    best = np.argmin(angles, axis=1)
    return best, angles[np.arange(len(best)), best], p, parton


def test_jets_have_the_resolution_put_in(events):
    best, distance, p, parton = nearest_jet(events, "b")
    near = distance < 0.1
    energy = p[0][np.arange(len(best)), best][near]
    true = parton[0][near]
    pull = (energy / true - 1) / np.hypot(0.3 / np.sqrt(true), 0.03)
    assert np.mean(pull) == pytest.approx(0.0, abs=0.04)
    assert np.std(pull) == pytest.approx(1.0, abs=0.03)
    # two angles of 15 mrad: the mean opening angle of a two-dimensional Gaussian
    assert np.mean(distance[near]) == pytest.approx(
        0.015 * np.sqrt(np.pi / 2), rel=0.03
    )
    assert np.mean(near) > 0.99


def test_leptons_have_efficiency_and_charge(events):
    truth = events.truth
    plus = np.abs(ak.to_numpy(truth.w_plus_down.pdg)) > 10
    found = ak.to_numpy(ak.num(events.leptons)) == 1
    n = len(events)
    assert np.mean(found) == pytest.approx(0.97, abs=5 * np.sqrt(0.97 * 0.03 / n))
    charge = ak.to_numpy(ak.flatten(events.leptons.charge))
    right = charge == np.where(plus, 1, -1)[found]
    assert np.mean(~right) == pytest.approx(0.001, abs=5 * np.sqrt(0.001 / n))
    pdg = ak.to_numpy(ak.flatten(events.leptons.pdg))
    assert np.all(np.sign(pdg) == -charge)
    assert set(np.abs(pdg)) == {11, 13}


def test_objects_are_ordered_by_energy(events):
    assert np.all(ak.to_numpy(ak.num(events.jets)) == 4)
    energy = np.stack(list(events.jets.E))
    assert np.all(np.diff(energy, axis=1) <= 0)


def test_tag_rates_are_those_put_in():
    rng = np.random.default_rng(3)
    response = GenerationOptions().response
    normal = rng.standard_normal(100_000)
    for code, share in ((5, 0.80), (-4, 0.10), (1, 0.01), (15, 0.01)):
        score = btag_score(normal, np.full(100_000, code), response)
        error = 5 * np.sqrt(share * (1 - share) / 100_000)
        assert np.mean(score > 0.5) == pytest.approx(share, abs=error)
        assert score.min() > 0
        assert score.max() < 1


def test_charges_have_the_purity_put_in():
    rng = np.random.default_rng(3)
    charge = electric_charge(np.repeat([5, -5, 21], 50_000))
    normal = rng.standard_normal(charge.shape)
    measured = charge_measurement(normal, charge, 0.72, width=1.0)
    right = np.sign(measured) == np.sign(charge)
    assert np.mean(right[:100_000]) == pytest.approx(0.72, abs=5 * 0.45 / 316)
    assert np.mean(measured[100_000:] > 0) == pytest.approx(0.5, abs=5 * 0.5 / 223)


def test_charges_of_quarks():
    codes = np.array([1, -1, 2, -2, 5, -5, 15, 0])
    np.testing.assert_allclose(
        electric_charge(codes) * 3, [-1, 1, 2, -2, -1, 1, -3, 0], atol=1e-15
    )


def test_tilting_keeps_energy_and_momentum():
    rng = np.random.default_rng(1)
    p = np.concatenate([np.full((1, 500), 90.0), rng.normal(0, 30, (3, 500))])
    moved = tilt(p, np.full(500, 0.03), np.full(500, -0.04))
    np.testing.assert_allclose(momentum(moved), momentum(p), rtol=1e-13)
    np.testing.assert_allclose(np.tan(angle(p, moved)), 0.05, rtol=1e-9)


def test_taus_become_leptons_or_narrow_jets():
    options = GenerationOptions(lepton_flavours=("tau",))
    events = generate(8_000, options, seed=3)
    jets = ak.to_numpy(ak.num(events.jets))
    leptons = ak.to_numpy(ak.num(events.leptons))
    # branching fractions to e and mu, Review of Particle Physics: 17.8 % and 17.4 %
    assert np.mean(jets == 4) == pytest.approx(0.352, abs=5 * 0.48 / 89)
    assert set(jets) == {4, 5}
    assert np.all(leptons <= (jets == 4))


def test_leptons_of_taus_carry_the_fraction_of_the_three_body_decay():
    # mean of (5 - 9 x^2 + 4 x^3)/3 is 7/20
    rng = np.random.default_rng(2)
    p = np.tile(np.array([100.0, 0, 0, 100.0])[:, None, None], (1, 60_000, 1))
    visible, codes = decay_taus(rng, p, np.full((60_000, 1), -15))
    leptons = codes != -15
    assert set(codes[leptons]) == {-11, -13}
    assert np.mean(visible[0][leptons]) == pytest.approx(35.0, abs=0.75)
