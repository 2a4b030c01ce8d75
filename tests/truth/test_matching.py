"""The closest assignment against a general solver of assignment problems."""

from __future__ import annotations

import awkward as ak
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import linear_sum_assignment

from tests.truth.toys import QUARKS, pair_events, without_truth
from toprecon.events import Channel, components
from toprecon.kinematics import angle
from toprecon.truth import closest_assignment, hadronic_sides
from toprecon.truth.matching import MOST_JETS

ALL = Channel.ALL_HADRONIC


def _angles(events, columns):
    """Angles of quarks and jets, shape (E, Q, J)."""
    n = len(events)
    jets = components(ak.flatten(events.jets, axis=1)).reshape(4, n, -1)
    return np.stack(
        [angle(components(events.truth[QUARKS[c]])[:, :, None], jets) for c in columns],
        axis=1,
    )


@pytest.mark.parametrize("extra", [0, 1, 3])
@pytest.mark.parametrize(
    ("w_plus", "w_minus", "columns"),
    [
        ("hadronic", "muon", [0, 1, 2, 3]),
        ("electron", "hadronic", [0, 3, 4, 5]),
        ("hadronic", "hadronic", [0, 1, 2, 3, 4, 5]),
    ],
)
def test_the_total_angle_is_the_least(w_plus, w_minus, columns, extra):
    """SciPy's solver of the linear sum assignment problem is the reference."""
    channel = ALL if len(columns) == 6 else Channel.LEPTON_JETS
    events = pair_events(
        60, w_plus=w_plus, w_minus=w_minus, extra=extra, smear=0.8, seed=extra
    )
    matching = closest_assignment(events, channel=channel)
    for event, cost in enumerate(_angles(events, columns)):
        rows, jets = linear_sum_assignment(cost)
        assert matching.assignment[event, columns].tolist() == jets.tolist()
        assert np.allclose(
            matching.angles[event, columns], cost[rows, jets], rtol=1e-12
        )
        assert matching.angle[event] == np.nanmax(matching.angles[event])
    others = [c for c in range(6) if c not in columns]
    assert (matching.assignment[:, others] == -1).all()
    assert np.isnan(matching.angles[:, others]).all()


@given(st.permutations(range(4)), st.integers(0, 2**31))
def test_jets_are_found_wherever_they_stand(order, seed):
    events = pair_events(3, order=order, smear=1e-4, seed=seed)
    matching = closest_assignment(events)
    expected = [*order, -1, -1]
    assert matching.assignment.tolist() == [expected] * 3
    assert (matching.angle < 0.01).all()


def test_every_quark_has_a_jet_of_its_own():
    events = pair_events(50, w_minus="hadronic", smear=2.0)
    matching = closest_assignment(events, channel=ALL)
    assert all(len(set(row)) == 6 for row in matching.assignment.tolist())


def test_other_decays_and_too_few_jets_have_no_answer():
    hadronic = pair_events(4, w_minus="hadronic")
    leptons = pair_events(4, w_plus="electron", w_minus="muon", extra=4)
    few = pair_events(4)
    few = ak.with_field(few, few.jets[:, :3], "jets")
    for events in (hadronic, leptons, few):
        matching = closest_assignment(events)
        assert (matching.assignment == -1).all()
        assert np.isnan(matching.angle).all()
    assert (closest_assignment(pair_events(4), channel=ALL).assignment == -1).all()


def test_events_without_truth_have_no_answer():
    events = without_truth(pair_events(5), [1, 3])
    matching = closest_assignment(events)
    assert np.isnan(matching.angle).tolist() == [False, True, False, True, False]
    bare = events[[name for name in events.fields if name != "truth"]]
    assert (closest_assignment(bare).assignment == -1).all()
    assert closest_assignment(events[:0]).assignment.shape == (0, 6)


def test_of_very_many_jets_the_most_energetic_are_considered():
    events = pair_events(10, extra=MOST_JETS)
    soft = ak.to_numpy(ak.local_index(events.jets, axis=1)) >= 4
    jets = ak.to_regular(events.jets)
    scale = np.where(soft, 0.1, 1.0)
    scaled = {
        c: ak.from_regular(jets[c] * scale, axis=1) for c in ("E", "px", "py", "pz")
    }
    events = ak.with_field(events, ak.zip(scaled, with_name="Momentum4D"), "jets")
    matching = closest_assignment(events)
    assert (matching.assignment[:, :4] == [0, 1, 2, 3]).all()


@pytest.mark.parametrize(
    ("w_plus", "w_minus", "expected"),
    [
        ("hadronic", "tau", (True, False)),
        ("electron", "hadronic", (False, True)),
        ("hadronic", "hadronic", (True, True)),
        ("muon", "muon", (False, False)),
    ],
)
def test_sides_that_decay_to_quarks(w_plus, w_minus, expected):
    sides = hadronic_sides(pair_events(2, w_plus=w_plus, w_minus=w_minus))
    assert tuple(bool(side.all()) for side in sides) == expected
    assert tuple(bool(side.any()) for side in sides) == expected
