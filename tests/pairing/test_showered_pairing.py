"""Pairing on showered events: shares of right assignments, with their denominators."""

from __future__ import annotations

import awkward as ak
import numpy as np
import pytest

from tests.showered import load
from toprecon.events import Channel, PairingClass, has_truth
from toprecon.pairing import PairingOptions, pair
from toprecon.selection import select
from toprecon.truth import classify, closest_assignment

LEPTON_JETS, ALL = Channel.LEPTON_JETS, Channel.ALL_HADRONIC


def b_candidates_are_true(events, matching):
    """Whether the two highest b scores are the jets of b and bbar."""
    order = ak.to_numpy(
        ak.argsort(events.jets.btag, axis=1, ascending=False, stable=True)[:, :2]
    )
    true = matching.assignment[:, [0, 3]]
    return (np.sort(order, axis=1) == np.sort(true, axis=1)).all(axis=1)


@pytest.fixture(scope="module", params=["LR", "RL"])
def lepton_jets(request, event_data):
    return prepared(event_data, f"lepjets_500_{request.param}", LEPTON_JETS)


@pytest.fixture(scope="module", params=["LR", "RL"])
def hadronic(request, event_data):
    return prepared(event_data, f"hadronic_500_{request.param}", ALL)


def prepared(folder, name, channel):
    """Preselected events, their matching, and which are matchable."""
    events, _ = load(folder, name)
    passed = select(events, channel=channel).passed
    share = passed.mean()
    events = events[passed]
    matching = closest_assignment(events, channel=channel)
    matched = matching.angle < 0.3
    return events, matching, matched & b_candidates_are_true(events, matching), share


def right_share(events, matching, matchable, options, channel):
    """Fraction of the matchable preselected events with the right pairing."""
    tops = pair(events, options, channel=channel)
    kind = classify(
        ak.to_numpy(tops.assignment),
        matching.assignment,
        has_truth=has_truth(events),
        is_signal_process=np.ones(len(events), bool),
        matched=matchable,
        channel=channel,
    )
    return (kind[matchable] == PairingClass.CORRECT).mean()


def test_reference_preselection_and_matchable_share(lepton_jets):
    _, _, matchable, passed = lepton_jets
    # 0.79 LR / 0.77 RL and 65 %: read off the jets' generator labels in the files
    assert 0.76 < passed < 0.80
    assert 0.63 < matchable.mean() < 0.68


def test_plain_masses_pair_93_percent_of_the_matchable(lepton_jets):
    events, matching, matchable, _ = lepton_jets
    share = right_share(events, matching, matchable, PairingOptions(), LEPTON_JETS)
    assert share >= 0.929


def test_plain_masses_pair_90_percent_of_the_matchable_hadronic(hadronic):
    events, matching, matchable, _ = hadronic
    share = right_share(events, matching, matchable, PairingOptions(), ALL)
    assert share >= 0.90
