from __future__ import annotations

import awkward as ak
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from toprecon.events import components, dense, momenta, record_of

sizes = st.lists(st.integers(0, 5), max_size=8)


def _random(n, seed=1):
    return np.random.default_rng(seed).normal(size=(4, n))


@given(st.integers(0, 20))
def test_components_give_back_what_momenta_took(n):
    p = _random(n)
    assert np.array_equal(components(momenta(p)), p)


@given(sizes)
def test_dense_gives_back_ragged_momenta(counts):
    n = sum(counts)
    p = _random(n)
    jets = momenta(p, counts, btag=np.arange(n) / 10)
    assert ak.num(jets).tolist() == counts
    most = max(counts, default=0) + 1
    box = dense(jets, most)
    tags = dense(jets, most, "btag")
    assert box.shape == (4, len(counts), most)
    assert tags.shape == (len(counts), most)
    there = np.arange(most) < np.array(counts, dtype=int)[:, None]
    assert np.array_equal(box[:, there], p)
    assert np.array_equal(tags[there], np.arange(n) / 10)
    assert np.isnan(box[:, ~there]).all()
    assert np.isnan(tags[~there]).all()


def test_dense_cuts_what_is_too_many():
    jets = momenta(_random(3), [3])
    assert np.array_equal(dense(jets, 2)[:, 0], _random(3)[:, :2])


def test_records_add_and_have_masses():
    p = np.array([[5.0, 5], [0, 0], [0, 0], [3, -3]])
    jets = momenta(p, [2], btag=[0.1, 0.9])
    assert ak.sum(jets, axis=1).mass.tolist() == [10.0]
    assert jets.mass.tolist() == [[4.0, 4.0]]
    assert (jets[:, 0] + jets[:, 1]).E.tolist() == [10.0]
    assert jets.btag.tolist() == [[0.1, 0.9]]


def test_components_of_single_precision_are_double():
    single = momenta(_random(3))
    single = ak.values_astype(single, np.float32)
    assert components(single).dtype == np.float64


def test_missing_momenta_stay_missing():
    p = np.full((4, 2), np.nan)
    assert np.isnan(components(momenta(p))).all()


@pytest.mark.parametrize("counts", [[], [0, 0]])
def test_no_objects_at_all(counts):
    jets = momenta(np.zeros((4, 0)), counts, btag=np.zeros(0))
    assert len(jets) == len(counts)
    assert dense(jets, 3).shape == (4, len(counts), 3)


def test_columns_of_a_record_share_one_offsets_array():
    out = record_of({"a": np.arange(3), "b": ak.Array([1.0, 2, 3])}, [1, 2])
    assert out.to_list() == [
        [{"a": 0, "b": 1.0}],
        [{"a": 1, "b": 2.0}, {"a": 2, "b": 3.0}],
    ]
    assert len(record_of({})) == 0
