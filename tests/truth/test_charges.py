"""The true charge of candidates whose content is known."""

from __future__ import annotations

import awkward as ak
import numpy as np
import pytest

from tests.truth.toys import pair_events, without_truth
from toprecon.events import Channel, components, momenta
from toprecon.truth import TruthOptions, true_sign

ALL = Channel.ALL_HADRONIC


def candidates(events, assignment, *, side=0, crossed=False):
    """Tops along the generated ones, or along the opposite ones."""
    top, antitop = components(events.truth.top), components(events.truth.antitop)
    if crossed:
        top, antitop = antitop, top
    n = len(events)
    return ak.zip(
        {
            "top": momenta(top),
            "antitop": momenta(antitop),
            "assignment": ak.Array(np.tile(assignment, (n, 1)).astype(np.int8)),
            "hadronic_side": np.full(n, side, np.int8),
        },
        depth_limit=1,
    )


@pytest.mark.parametrize("side", [1, -1])
@pytest.mark.parametrize(
    ("w_plus", "w_minus", "true_side"),
    [("hadronic", "muon", 1), ("electron", "hadronic", -1)],
)
def test_the_generated_lepton_says_which_side_is_the_top(
    w_plus, w_minus, true_side, side
):
    events = pair_events(4, w_plus=w_plus, w_minus=w_minus)
    # the directions would say the opposite: they must not be asked
    tops = candidates(events, [0, 1, 2, 3, -1, -1], side=side, crossed=True)
    assert true_sign(events, tops).tolist() == [side * true_side] * 4


@pytest.mark.parametrize(
    ("assignment", "expected"),
    [
        ([0, 1, 2, 3, 4, 5], 1),
        ([3, 4, 5, 0, 1, 2], -1),
        ([0, 4, 5, 3, 1, 2], 1),  # only the true b counts, not the W jets
        ([1, 0, 2, 4, 3, 5], 1),  # wherever in the candidate it is
        ([1, 3, 2, 4, 0, 5], -1),
    ],
)
def test_the_true_b_jet_in_a_hadronic_candidate_decides(assignment, expected):
    events = pair_events(4, w_minus="hadronic")
    tops = candidates(events, assignment, crossed=expected == 1)
    assert true_sign(events, tops, channel=ALL).tolist() == [expected] * 4


@pytest.mark.parametrize("crossed", [True, False])
def test_both_true_b_jets_in_one_candidate_leave_it_to_the_directions(crossed):
    events = pair_events(4, w_minus="hadronic")
    tops = candidates(events, [0, 3, 2, 1, 4, 5], crossed=crossed)
    expected = -1 if crossed else 1
    assert true_sign(events, tops, channel=ALL).tolist() == [expected] * 4


def test_a_b_jet_far_from_its_quark_is_no_true_b_jet():
    events = pair_events(20, w_minus="hadronic", smear=0.05)
    tops = candidates(events, [3, 4, 5, 0, 1, 2])
    near = true_sign(events, tops, channel=ALL)
    strict = TruthOptions(match_angle=1e-6)
    far = true_sign(events, tops, channel=ALL, options=strict)
    assert near.tolist() == [-1] * 20
    assert far.tolist() == [1] * 20  # nothing matched: the directions decide


def test_a_pair_with_two_leptons_is_left_to_the_directions():
    events = pair_events(3, w_plus="tau", w_minus="muon", extra=2)
    for crossed, expected in ((False, 1), (True, -1)):
        tops = candidates(events, [0, 1, 2, 3, -1, -1], side=1, crossed=crossed)
        assert true_sign(events, tops).tolist() == [expected] * 3


def test_without_truth_or_candidates_there_is_no_sign():
    events = without_truth(pair_events(3), [1])
    tops = candidates(events, [0, 1, 2, 3, -1, -1], side=1)
    sign = true_sign(events, tops)
    assert np.isnan(sign).tolist() == [False, True, False]
    bare = events[[name for name in events.fields if name != "truth"]]
    assert np.isnan(true_sign(bare, tops)).all()
    hadronic = pair_events(3, w_minus="hadronic")
    nothing = ak.with_field(
        candidates(hadronic, [-1] * 6), momenta(np.full((4, 3), np.nan)), "top"
    )
    assert np.isnan(true_sign(hadronic, nothing, channel=ALL)).all()
