from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from toprecon.events import CutFlow

STEPS = ("one lepton", "four jets")
stages = st.lists(st.integers(0, 2), max_size=30)


def test_counts_by_hand():
    flow = CutFlow.from_stage([0, 1, 2, 0, 1], [1, 2, 3, 4, -5], STEPS)
    assert flow.steps == ("all events", *STEPS)
    assert flow.counts.tolist() == [5, 3, 2]
    assert flow.sums.tolist() == [5, 8, 5]
    assert flow.variances.tolist() == [55, 26, 17]
    assert flow.efficiency.tolist() == [1, 8 / 5, 1]


@given(stages, stages)
def test_flows_of_parts_add_up(first, second):
    def flow(stage):
        return CutFlow.from_stage(stage, np.arange(len(stage)), STEPS)

    whole = CutFlow.from_stage(
        first + second, [*range(len(first)), *range(len(second))], STEPS
    )
    both = flow(first) + flow(second)
    assert np.array_equal(both.counts, whole.counts)
    assert np.array_equal(both.sums, whole.sums)  # whole numbers: exact
    assert np.array_equal(both.variances, whole.variances)
    assert np.all(np.diff(both.counts) <= 0)


def test_scaling_acts_on_weights_only():
    flow = CutFlow.from_stage([0, 1], [1.0, 2.0], STEPS).scaled(3.0)
    assert flow.counts.tolist() == [2, 1, 1]
    assert flow.sums.tolist() == [9, 3, 3]
    assert flow.variances.tolist() == [45, 9, 9]


def test_no_events_and_no_steps():
    nothing = CutFlow.from_stage([], [], STEPS)
    assert nothing.counts.tolist() == [0, 0, 0]
    assert all(math.isnan(x) for x in nothing.efficiency)
    assert CutFlow.from_stage([0], [2.0], ()).sums.tolist() == [2.0]


def test_flows_of_different_steps_cannot_be_added():
    first = CutFlow.from_stage([0], [1.0], STEPS)
    with pytest.raises(ValueError, match="cut flows of different steps"):
        first + CutFlow.from_stage([0], [1.0], STEPS[:1])


def test_the_text_has_a_line_per_step():
    text = str(CutFlow.from_stage([0, 1], [1.0, 1.0], STEPS))
    assert text.splitlines() == [
        "all events          2   1.0000",
        "one lepton          1   0.5000",
        "four jets           1   0.5000",
    ]
