"""Calibration on showered events: tuned on half A, judged on half B."""

from __future__ import annotations

import awkward as ak
import numpy as np
import pytest

from tests.pairing.test_showered_pairing import ALL, LEPTON_JETS, prepared
from toprecon.errors import OptionError
from toprecon.events import PairingClass, has_truth
from toprecon.pairing import PairingOptions, calibrate, contributions, pair
from toprecon.resampling import in_half_a
from toprecon.truth import classify, true_sign

FOLDERS = {LEPTON_JETS: "lepjets", ALL: "hadronic"}


@pytest.fixture(scope="module", params=[LEPTON_JETS, ALL])
def calibrated(request, event_data):
    """Channel, samples by helicity, calibration from half A of both."""
    channel = request.param
    samples = {
        h: prepared(event_data, f"{FOLDERS[channel]}_500_{h}", channel)
        for h in ("LR", "RL")
    }
    events = ak.concatenate([s[0] for s in samples.values()])
    right = [
        np.where((m.angle < 0.3)[:, None], m.assignment, -1)
        for _, m, *_ in samples.values()
    ]
    found = calibrate(events, np.concatenate(right), channel=channel)
    return channel, samples, found


def half_b(sample, options, channel):
    """Tops, whether right, matchable and in half B."""
    events, matching, matchable, _ = sample
    tops = pair(events, options, channel=channel)
    kind = classify(
        ak.to_numpy(tops.assignment),
        matching.assignment,
        has_truth=has_truth(events),
        is_signal_process=np.ones(len(events), bool),
        matched=matchable,
        channel=channel,
    )
    b = matchable & ~in_half_a(ak.to_numpy(events.id))
    return tops, kind == PairingClass.CORRECT, b


@pytest.mark.parametrize("helicity", ["LR", "RL"])
def test_ratio_pairs_the_matchable_of_half_b(calibrated, helicity):
    channel, samples, found = calibrated
    options = PairingOptions().calibrated(found)
    _, right, b = half_b(samples[helicity], options, channel)
    assert right[b].mean() >= (0.95 if channel is LEPTON_JETS else 0.92)


@pytest.mark.parametrize("helicity", ["LR", "RL"])
def test_charges_decide_the_side_or_the_sign(calibrated, helicity):
    channel, samples, found = calibrated
    options = PairingOptions().calibrated(found, charges=True)
    tops, right, b = half_b(samples[helicity], options, channel)
    if channel is LEPTON_JETS:
        assert right[b].mean() >= 0.97
        return
    events, matching, *_ = samples[helicity]
    sign = true_sign(events, tops, channel=channel, matching=matching) == 1
    share = ak.to_numpy(tops.sign_share)
    clear = b & (share >= np.median(share[b]))
    assert sign[b].mean() >= 0.85
    assert sign[clear].mean() >= 0.955


@pytest.mark.parametrize("score", ["plain", "correlated", "ratio"])
@pytest.mark.parametrize("tags", ["mask", "likelihood"])
def test_contributions_add_up_to_the_score(calibrated, score, tags):
    channel, samples, found = calibrated
    options = PairingOptions().calibrated(found, score=score, tags=tags, charges=True)
    events = samples["LR"][0][:300]
    tops = pair(events, options, channel=channel)
    parts = contributions(events, tops, options, channel=channel)
    assert np.allclose(sum(parts.values()), tops.chi2, rtol=1e-7, atol=1e-7)


def test_a_calibration_survives_the_text_of_a_plan(calibrated):
    channel, samples, found = calibrated
    options = PairingOptions().calibrated(found)
    again = PairingOptions(**options.to_mapping())
    assert again == options
    events = samples["RL"][0][:100]
    one, two = (pair(events, o, channel=channel) for o in (options, again))
    assert np.array_equal(one.chi2, two.chi2)


def test_a_calibration_of_another_energy_is_refused(calibrated):
    channel, samples, found = calibrated
    options = PairingOptions().calibrated(found.replace(sqrt_s=365.0))
    with pytest.raises(OptionError, match=r"within 5% of 500 GeV .* for 365 GeV"):
        pair(samples["LR"][0][:10], options, channel=channel)


def test_a_score_without_calibration_is_refused():
    with pytest.raises(OptionError, match=r"score = ratio requires calibrations"):
        PairingOptions(score="ratio")


def test_too_few_events_are_refused(calibrated):
    channel, samples, _ = calibrated
    events, matching, *_ = samples["LR"]
    with pytest.raises(OptionError, match=r"at least .* assignments are required"):
        calibrate(events[:60], matching.assignment[:60], channel=channel)
