from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from toprecon.errors import OptionError
from toprecon.events import Binning

edges = st.lists(st.floats(-1e6, 1e6), min_size=2, max_size=9, unique=True).map(sorted)


@given(edges, st.lists(st.floats(-2e6, 2e6), max_size=20))
def test_every_value_falls_where_the_edges_say(edges, values):
    binning = Binning.of(edges)
    for value, index in zip(values, binning.digitise(values), strict=True):
        if index < 0:
            assert value < edges[0] or value > edges[-1]
        else:
            last = index == len(binning) - 1
            assert edges[index] <= value
            assert value < edges[index + 1] or (last and value == edges[-1])


@given(edges)
def test_every_edge_belongs_to_the_bin_above_it_and_the_last_to_the_last(edges):
    binning = Binning.of(edges)
    n = len(binning)
    assert binning.digitise(edges).tolist() == [*range(n), n - 1]
    # numpy's own histogram has the same convention
    assert np.array_equal(
        np.bincount(binning.digitise(edges), minlength=n),
        np.histogram(edges, edges)[0],
    )


def test_missing_and_outside_have_no_bin():
    binning = Binning.regular(4, -1, 1)
    assert binning.digitise([math.nan, -1.1, 1.1, math.inf]).tolist() == [-1] * 4
    assert binning.digitise([]).tolist() == []


def test_single_precision_is_compared_in_double():
    value = np.float32(0.1)  # above 0.1 in double
    assert Binning((0.0, 0.1, 1.0)).digitise(np.array([value])).tolist() == [1]
    assert Binning((0.0, float(value), 1.0)).digitise([value]).tolist() == [1]


def test_one_bin_and_regular_bins():
    assert len(Binning((0.0, 1.0))) == 1
    four = Binning.regular(4, -1, 1)
    assert four.edges == (-1.0, -0.5, 0.0, 0.5, 1.0)
    assert four.centres.tolist() == [-0.75, -0.25, 0.25, 0.75]
    assert four.widths.tolist() == [0.5] * 4
    assert Binning((0, 1)) == Binning((0.0, 1.0))
    assert hash(Binning((0, 1))) == hash(Binning((0.0, 1.0)))


@pytest.mark.parametrize(
    ("wrong", "message"),
    [
        ((1.0,), r"edges: at least two are required; got \(1.0,\)"),
        ((), "edges: at least two are required"),
        ((0.0, 0.0), "edges: must be finite and strictly increasing; got"),
        ((1.0, 0.0), "strictly increasing"),
        ((0.0, math.nan), "must be finite"),
        ((0.0, math.inf), "must be finite"),
    ],
)
def test_wrong_edges_are_refused(wrong, message):
    with pytest.raises(OptionError, match=message):
        Binning(wrong)
