"""Selection of toy events whose fate is known by construction."""

from __future__ import annotations

import awkward as ak
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from toprecon.errors import MissingFieldError, OptionError
from toprecon.events import Channel, Sample, make_events, momenta
from toprecon.selection import OBSERVABLES, SelectionOptions, select

HADRONIC = Channel.ALL_HADRONIC


def toy(btags, lepton_energies, *, photons=None):
    """Events with jets of 10 GeV along x, and leptons along z."""
    n = len(btags)
    tags = np.array([t for event in btags for t in event], dtype=float)
    energies = np.array([e for event in lepton_energies for e in event], dtype=float)
    jets = np.zeros((4, len(tags)))
    jets[:2] = 10.0
    leptons = np.zeros((4, len(energies)))
    leptons[0] = leptons[3] = energies
    fields = {
        "jets": momenta(jets, [len(e) for e in btags], btag=tags),
        "leptons": momenta(
            leptons,
            [len(e) for e in lepton_energies],
            charge=np.ones(len(energies)),
        ),
        "weight": np.ones(n),
        "sample": np.zeros(n, np.int16),
        "helicity": np.full(n, -1, np.int8),
        "sqrt_s": np.full(n, 500.0),
        "id": np.arange(n, dtype=np.uint64),
    }
    if photons is not None:
        fields["photons"] = photons
    return make_events(fields, (Sample("toy"),))


GOOD = [0.9, 0.1, 0.5, 0.2]


def test_every_step_catches_its_events_in_order():
    events = toy(
        [GOOD, GOOD, GOOD, GOOD[:3], [0.6, 0.5, 0, 0], [0.9, 0.25, 0, 0], []],
        [[50], [], [50, 20], [50], [50], [50], []],
    )
    selection = select(events)
    assert selection.steps == (
        "1 lepton",
        "at least 4 jets",
        "highest b score > 0.6",
        "second b score > 0.25",
    )
    assert selection.stage.tolist() == [0, 1, 1, 2, 3, 4, 1]
    assert selection.passed.tolist() == [True] + [False] * 6
    flow = selection.cut_flow(np.ones(7))
    assert flow.counts.tolist() == [7, 4, 3, 2, 1]


def test_the_channel_fills_in_what_is_left_open():
    six = [0.9, 0.8, 0, 0, 0, 0]
    events = toy([six, six, six[:5]], [[], [50], []])
    selection = select(events, channel=HADRONIC)
    assert selection.steps[:2] == ("no leptons", "at least 6 jets")
    assert selection.stage.tolist() == [0, 1, 2]
    both = SelectionOptions(n_leptons=1, min_jets=2)
    assert select(events, both, channel=HADRONIC).stage.tolist() == [1, 0, 1]


def test_soft_leptons_are_not_counted():
    events = toy([GOOD] * 3, [[50, 5], [10], [9.99]])
    selection = select(events, SelectionOptions(min_lepton_energy=10))
    assert selection.stage.tolist() == [0, 0, 1]
    assert selection.observables["selection.n_leptons"].tolist() == [1, 1, 0]


def test_most_jets_and_no_tags():
    events = toy([GOOD, [*GOOD, 0.0], [0, 0, 0, 0]], [[50]] * 3)
    options = SelectionOptions(max_jets=4, btag_high=0, btag_low=0)
    selection = select(events, options)
    assert selection.steps == ("1 lepton", "at least 4 jets", "at most 4 jets")
    assert selection.stage.tolist() == [0, 3, 0]


def test_an_object_that_is_not_there_fails_the_step_that_needs_it():
    events = toy([[0.9], []], [[50], [50]])
    options = SelectionOptions(min_jets=0)
    assert select(events, options).stage.tolist() == [4, 3]


def test_scores_equal_to_the_limit_fail():
    events = toy([[0.6, 0.5, 0, 0], [np.nextafter(0.6, 1), 0.5, 0, 0]], [[50]] * 2)
    assert select(events).stage.tolist() == [3, 0]


def test_observables_by_hand():
    photons = momenta(np.array([[5.0], [0], [0], [5.0]]), [1, 0])
    events = toy([GOOD, []], [[30, 50], []], photons=photons)
    values = select(events).observables
    assert values["selection.n_jets"].tolist() == [4, 0]
    assert values["selection.btag_high"].tolist()[0] == 0.9
    assert values["selection.btag_low"].tolist()[0] == 0.5
    assert values["selection.lepton_energy"].tolist()[0] == 50
    for name in ("btag_high", "btag_low", "lepton_energy"):
        assert np.isnan(values[f"selection.{name}"][1])
    # 4 jets of 10 GeV along x; 80 GeV of leptons and 5 GeV of photon along z
    assert values["selection.visible_energy"].tolist() == [125.0, 0.0]
    assert values["selection.missing_momentum"].tolist() == [np.hypot(40, 85), 0.0]
    assert set(values.fields) == {item.name for item in OBSERVABLES}


def test_no_events_at_all():
    events = toy([[0.5]], [[1]])[:0]
    selection = select(events)
    assert selection.stage.shape == (0,)
    assert selection.cut_flow(np.zeros(0)).counts.tolist() == [0] * 5
    assert len(selection.observables) == 0


scores = st.lists(st.floats(0, 1), max_size=8)


@given(
    st.lists(st.tuples(scores, st.lists(st.floats(1, 100), max_size=3)), max_size=6),
    st.floats(0.01, 1),
    st.floats(0.01, 1),
    st.integers(0, 5),
)
def test_events_pass_exactly_if_they_pass_every_requirement(
    events, high, low, min_jets
):
    tags, energies = [e[0] for e in events], [e[1] for e in events]
    options = SelectionOptions(
        btag_high=high, btag_low=low, min_jets=min_jets, min_lepton_energy=20
    )
    passed = select(toy(tags, energies), options).passed
    for event, (jets, leptons) in enumerate(events):
        ordered = sorted(jets, reverse=True)
        expected = (
            sum(e >= 20 for e in leptons) == 1
            and len(jets) >= min_jets
            and len(jets) >= 2
            and ordered[0] > high
            and ordered[1] > low
        )
        assert passed[event] == expected


@given(scores, st.randoms(use_true_random=False))
def test_the_order_of_jets_does_not_matter(jets, random):
    shuffled = list(jets)
    random.shuffle(shuffled)
    selection = select(toy([jets, shuffled], [[50], [50]]))
    assert selection.stage[0] == selection.stage[1]
    first, second = selection.observables.to_list()
    assert str(first) == str(second)


RANDOM = toy(np.random.default_rng(1).uniform(0, 1, (40, 4)).tolist(), [[50]] * 40)


@given(st.floats(0, 1), st.floats(0, 1))
def test_a_tighter_selection_keeps_fewer(low, high):
    loose, tight = sorted((low, high))
    kept = [
        select(RANDOM, SelectionOptions(btag_high=limit)).passed
        for limit in (loose, tight)
    ]
    assert not np.any(kept[1] & ~kept[0])


def test_jets_without_scores_are_refused():
    events = toy([GOOD], [[50]])
    bare = ak.with_field(events, events.jets[["E", "px", "py", "pz"]], "jets")
    with pytest.raises(MissingFieldError, match=r"events.jets: field 'btag' is requi"):
        select(bare)


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        (
            {"min_jets": 5, "max_jets": 4},
            "min_jets must not be above max_jets; got 5 and 4",
        ),
        ({"btag_high": 1.5}, "btag_high: must be <= 1; got 1.5"),
        ({"n_leptons": -1}, "n_leptons: must be >= 0; got -1"),
        ({"min_lepton_energy": -1}, "min_lepton_energy: must be >= 0 GeV; got -1"),
    ],
)
def test_wrong_settings_are_refused(settings, message):
    with pytest.raises(OptionError, match=message):
        SelectionOptions(**settings)
