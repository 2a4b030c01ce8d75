"""Likelihoods of single jets: fits on toys, purities on showered events."""

from __future__ import annotations

import awkward as ak
import numpy as np
import pytest

from tests.pairing.test_showered_pairing import LEPTON_JETS
from tests.showered import load
from toprecon.errors import OptionError
from toprecon.pairing import calibrate, charge_purity, reliability
from toprecon.pairing.likelihoods import (
    ChargeLikelihood,
    TagLikelihood,
    fit_charge,
    fit_tag,
)
from toprecon.resampling import in_half_a
from toprecon.truth import closest_assignment


def test_charges_are_odd_and_missing_ones_say_nothing():
    likelihood = ChargeLikelihood(vertex=2.0, track=3.0)
    vertex, track = np.array([1.0, -1.0, np.nan]), np.array([0.5, -0.5, np.nan])
    assert likelihood.log_ratio(vertex, track) == pytest.approx([3.5, -3.5, 0.0])


def test_fit_of_the_charges_finds_the_weights_of_two_gaussians(rng):
    # mean +-m, width s: the log ratio is 2 m x/s^2, here 2*0.5/1 and 2*0.2/0.25
    n = 40_000
    found = fit_charge(rng.normal(0.5, 1.0, n), rng.normal(0.2, 0.5, n))
    # errors of the weights about 0.012 and 0.024: the chance of failing is below 1e-6
    assert found.vertex == pytest.approx(1.0, abs=0.08)
    assert found.track == pytest.approx(1.6, abs=0.15)


def test_tag_table_is_the_ratio_of_densities(rng):
    # densities 2x of b and 2(1-x) of others: ln(x/(1-x))
    n = 60_000
    score = np.sqrt(rng.uniform(size=2 * n))
    score[n:] = 1 - score[n:]
    found = fit_tag(score, np.arange(2 * n) < n, 20)
    x = np.linspace(0.3, 0.95, 14)
    # bins hold 3000 b jets (0.03 in the log, 5 sigma 0.15) and are up to 0.2 wide
    assert np.abs(found.of(x) - np.log(x / (1 - x))).max() < 0.45
    assert (np.diff(found.log_ratio) > 0).all()
    assert found.of(np.array([np.nan])) == 0


@pytest.mark.parametrize(
    "fields",
    [
        {"edges": (0.5, 0.2), "log_ratio": (0.0, 0.0, 0.0)},
        {"edges": (0.5,), "log_ratio": (0.0,)},
    ],
)
def test_a_table_that_does_not_fit_is_refused(fields):
    with pytest.raises(OptionError, match="edges must increase and log_ratio have one"):
        TagLikelihood(**fields)


@pytest.fixture(scope="module")
def showered(event_data):
    """Events, true assignment of the matched ones, calibration from half A."""
    events, _ = load(event_data, "lepjets_500_LR", 8000)
    matching = closest_assignment(events, channel=LEPTON_JETS)
    known = np.where((matching.angle < 0.3)[:, None], matching.assignment, -1)
    return events, known, calibrate(events, known)


def half_b_jets(events, known):
    """Flat positions of the b and the bbar jet, matched events of half B."""
    rows = (known >= 0).any(axis=1) & ~in_half_a(ak.to_numpy(events.id))
    counts = ak.to_numpy(ak.num(events.jets))
    start = (np.cumsum(counts) - counts)[rows]
    return start + known[rows, 0], start + known[rows, 3], rows


def test_double_tags_give_the_charge_purity_of_truth(showered):
    events, known, found = showered
    b, bbar, _ = half_b_jets(events, known)
    jets = ak.flatten(events.jets)
    ratio = found.charge.log_ratio(
        ak.to_numpy(jets.vertex_charge), ak.to_numpy(jets.track_charge)
    )
    both = (ratio[b] != 0) & (ratio[bbar] != 0)
    opposite = (ratio[b] * ratio[bbar] < 0)[both]
    purity = charge_purity(opposite.sum(), (~opposite).sum())
    right = np.concatenate([ratio[b][both] < 0, ratio[bbar][both] > 0])
    truth = right.mean()
    error = np.hypot(purity.purity_error, np.sqrt(truth * (1 - truth) / len(right)))
    print(f"double tags {purity}, truth {truth:.4f}, pairs {both.sum()}")
    # the two agree by 4 errors: the chance of failing is below 1e-4
    assert abs(purity.purity - truth) < 4 * error
    assert truth > 0.65


def test_probabilities_from_b_scores_are_those_of_half_b(showered):
    events, known, found = showered
    b, bbar, rows = half_b_jets(events, known)
    jets = ak.flatten(events.jets)
    is_b = np.zeros(len(jets), bool)
    is_b[b] = is_b[bbar] = True
    among = np.repeat(rows, ak.to_numpy(ak.num(events.jets)))
    ratio, is_b = found.tag.of(ak.to_numpy(jets.btag)[among]), is_b[among]
    odds = np.exp(ratio) * is_b.mean() / (1 - is_b.mean())
    curve = reliability(odds / (1 + odds), is_b)
    filled = curve.weight > 50
    # half A knows its table about as well as half B tests it
    pull = (curve.fraction - curve.stated)[filled] / (np.sqrt(2) * curve.error[filled])
    picked = ratio > 0
    purity, efficiency = is_b[picked].mean(), picked[is_b].mean()
    print(f"b purity {purity:.3f}, efficiency {efficiency:.3f}, pulls {pull}")
    # at most ten bins: the chance of any pull beyond 4.5 is below 1e-4
    assert np.abs(pull).max() < 4.5
    assert purity > 0.88  # measured 0.897 where b is the more likely of the two
    assert efficiency > 0.7


def test_events_of_two_energies_are_refused(showered):
    events, known, _ = showered
    energy = np.where(np.arange(len(events)) % 2, 500.0, 365.0)
    mixed = ak.with_field(events, energy, "sqrt_s")
    with pytest.raises(
        OptionError,
        match=r"events of one collision energy .* got 365, 500; calibrate every energy",
    ):
        calibrate(mixed, known)


def test_events_without_known_assignment_are_refused(showered):
    events, known, _ = showered
    with pytest.raises(OptionError, match="got no usable events"):
        calibrate(events, np.full_like(known, -1))


def test_a_calibration_with_densities_of_another_size_is_refused(showered):
    found = showered[2]
    with pytest.raises(OptionError, match=r"one dimension per name; got 4 for 3 names"):
        found.replace(names=found.names[:3])
    with pytest.raises(OptionError, match="in the order of the terms"):
        found.replace(names=found.names[::-1])
