from __future__ import annotations

import numpy as np
import pytest

from tests.boosted.toys import make_toy_events, prongs
from toprecon.boosted import BoostedOptions, ChargeOptions, calibrate_charge
from toprecon.boosted.charges import charge_score, fat_jet_charges, fit_charge_weights
from toprecon.boosted.fatjets import find_fat_jets, read_particles
from toprecon.errors import InputError
from toprecon.events import components
from toprecon.jets import jet_charge

MUON, HADRON = 4, 0


def toy_event():
    """Two fat jets along x: in each a b jet with a muon, and a W jet."""
    p4 = prongs(
        [200.0, 50.0, 250.0, 100.0, 150.0, 150.0],
        [[1, 0, 0], [1, 0.1, 0], [1, 0.4, 0], [-1, 0, 0], [-1, -0.3, 0], [-1, 0, 0.4]],
    )
    charge = [-1.0, -1.0, 1.0, 1.0, -1.0, 0.0]
    kind = [HADRON, MUON, HADRON, HADRON, HADRON, HADRON]
    jet = [0, 0, 1, 2, 3, 3]
    particles = np.concatenate([p4, [charge], [kind], [jet]])
    jets = np.stack(
        [
            np.append(p4[:, :2].sum(axis=1), [0.9, -1.5]),
            np.append(p4[:, 2], [0.2, 7.0]),
            np.append(p4[:, 3], [0.7, 1.2]),
            np.append(p4[:, 4:].sum(axis=1), [0.1, 9.0]),
        ],
        axis=1,
    )
    return particles, jets


def charges_of(events, kappa=0.5):
    particles = read_particles(events)
    fat_jets = find_fat_jets(particles, np.asarray(events.sqrt_s), BoostedOptions())
    return fat_jet_charges(events, particles, fat_jets, kappa)


def test_charges_of_two_fat_jets_by_hand():
    particles, jets = toy_event()
    vertex, b, w, lepton = charges_of(make_toy_events([particles], jets=[jets]))[:, 0]
    # the jet with the highest b score in each fat jet
    assert vertex.tolist() == [-1.5, 1.2]
    assert b.tolist() == pytest.approx([-np.sqrt(0.8) - np.sqrt(0.2), 1.0])
    assert w.tolist() == pytest.approx([1.0, -np.sqrt(0.5)])
    assert lepton.tolist() == pytest.approx([-np.sqrt(0.2), 0.0])


def test_the_charge_of_the_b_jet_is_the_jet_charge():
    particles, jets = toy_event()
    events = make_toy_events([particles], jets=[jets])
    flat = events.particles[0]
    expected = jet_charge(
        flat.charge,
        components(flat),
        flat.jet_index,
        0.3,
        counts=[6],
        jet_counts=[4],
    )
    b = charges_of(events, kappa=0.3)[1, 0]
    np.testing.assert_allclose(b, expected[[0, 2]])


def test_conjugating_all_charges_turns_the_score_around():
    particles, jets = toy_event()
    other_particles, other_jets = particles.copy(), jets.copy()
    other_particles[4] *= -1
    other_jets[5] *= -1
    events = make_toy_events([particles, other_particles], jets=[jets, other_jets])
    score = charge_score(charges_of(events), ChargeOptions())
    assert score[0] == pytest.approx(-score[1])
    assert score[0] > 0


def test_events_without_jets_have_no_b_charges():
    particles, _ = toy_event()
    particles[6] = -1
    charges = charges_of(make_toy_events([particles]))
    assert (charges[[0, 1, 3]] == 0).all()
    assert (charges[2] != 0).all()


def test_logistic_regression_finds_the_weights_that_made_the_sample(rng):
    # P(first is top) = 1/(1 + exp(-w.d)) with known w; 20 000 events fix each to 3 %
    charges = rng.normal(size=(4, 20_000, 2))
    true = np.array([-1.0, -0.5, 0.8, 0.3])
    score = true @ (charges[..., 0] - charges[..., 1])
    is_top = rng.random(20_000) < 1 / (1 + np.exp(-score))
    fitted = fit_charge_weights(charges, is_top, ChargeOptions())
    found = [fitted.vertex, fitted.b_charge, fitted.w_charge, fitted.lepton_charge]
    np.testing.assert_allclose(found, true, atol=0.12)  # 5 standard deviations


def test_too_few_events_for_the_calibration_are_refused():
    particles, jets = toy_event()
    with pytest.raises(InputError, match=r"at least 100 events .* different fat jets"):
        calibrate_charge(make_toy_events([particles], jets=[jets]))
