from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from toprecon.errors import InputError
from toprecon.events import Helicity, Sample

counts = st.integers(0, 10**9)


def test_unknown_numbers_are_left_out_of_the_mapping():
    data = Sample("x").to_mapping()
    assert "cross_section" not in data
    assert data["helicity"] == "MIXED"


@given(
    sqrt_s=st.one_of(st.just(math.nan), st.floats(300, 4000)),
    section=st.one_of(st.just(math.nan), st.floats(0, 1e6)),
    helicity=st.sampled_from(Helicity),
    entries=counts,
)
def test_mapping_round_trip(sqrt_s, section, helicity, entries):
    sample = Sample(
        "s",
        "ww",
        helicity,
        sqrt_s,
        cross_section_lr=section,
        entries=entries,
        sum_of_weights=float(entries),
    )
    again = Sample.from_mapping(sample.to_mapping())
    assert again.to_mapping() == sample.to_mapping()
    assert math.isnan(again.sqrt_s) == math.isnan(sqrt_s)


def test_stated_sum_of_weights_stands_for_the_sample():
    read = Sample("x", entries=5, sum_of_weights=5.0)
    assert read.normalisation == 5.0
    assert read.replace(stated_sum_of_weights=8.0).normalisation == 8.0


def test_chunks_of_one_file_keep_what_is_stated_of_the_whole():
    whole = {"generated": 100, "stated_sum_of_weights": 200.0}
    first = Sample("x", entries=30, sum_of_weights=60.0, **whole)
    second = Sample("x", entries=40, sum_of_weights=80.0, **whole)
    both = first.merged(second)
    assert both.generated == 100
    assert both.stated_sum_of_weights == both.normalisation == 200.0
    assert (both.entries, both.sum_of_weights) == (70, 140.0)


def test_chunks_that_complete_a_file_keep_what_was_generated():
    first = Sample("x", generated=70, entries=30, sum_of_weights=30.0)
    both = first.merged(first.replace(entries=40, sum_of_weights=40.0))
    assert both.generated == both.entries == 70
    assert both.merged(first.replace(entries=0, sum_of_weights=0.0)).generated == 70


@given(st.lists(st.integers(0, 50), min_size=1, max_size=6))
def test_generated_chunks_add_up_to_the_whole(sizes):
    parts = [
        Sample("x", generated=n, entries=n, sum_of_weights=float(n)) for n in sizes
    ]
    total = parts[0]
    for part in parts[1:]:
        total = total.merged(part)
    n = sum(sizes)
    assert (total.generated, total.entries, total.normalisation) == (n, n, n)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"helicity": Helicity.RL}, "helicity 'MIXED' and 'RL'"),
        ({"cross_section": 3.0}, "cross_section None and 3.0"),
        ({"generated": 7}, "generated -1 and 7"),
        ({"stated_sum_of_weights": 7.0}, "stated_sum_of_weights None and 7.0"),
    ],
)
def test_parts_that_disagree_are_refused(change, message):
    known = Sample("x", entries=2)
    with pytest.raises(InputError, match=r"sample 'x': its parts must be") as caught:
        known.merged(known.replace(**change))
    assert message in str(caught.value)
    assert not known.is_same_as(known.replace(**change))


def test_only_top_pairs_are_signal():
    assert Sample("x").is_signal_process
    assert not Sample("x", "ww").is_signal_process
