"""Pairing classes by hand, and what they must be blind to."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from toprecon.events import PairingClass
from toprecon.truth import classify

SIX = [0, 1, 2, 3, 4, 5]
FOUR = [0, 1, 2, 3, -1, -1]


def _class(chosen, true, **changes):
    flags = {"has_truth": [True], "is_signal_process": [True], "matched": [True]}
    (value,) = classify([chosen], [true], **{**flags, **changes})
    return PairingClass(value)


@pytest.mark.parametrize(
    ("chosen", "true", "expected"),
    [
        (FOUR, FOUR, PairingClass.CORRECT),
        ([0, 2, 1, 3, -1, -1], FOUR, PairingClass.CORRECT),
        ([3, -1, -1, 0, 1, 2], FOUR, PairingClass.CORRECT),  # called the antitop
        ([3, 1, 2, 0, -1, -1], FOUR, PairingClass.B_SWAPPED),
        ([4, 1, 2, 3, -1, -1], FOUR, PairingClass.B_SWAPPED),  # a fifth jet as b
        ([0, 1, 4, 3, -1, -1], FOUR, PairingClass.W_MIXED),
        ([1, 0, 2, 3, -1, -1], FOUR, PairingClass.W_MIXED),
        (SIX, SIX, PairingClass.CORRECT),
        ([3, 5, 4, 0, 2, 1], SIX, PairingClass.CORRECT),
        ([3, 1, 2, 0, 4, 5], SIX, PairingClass.B_SWAPPED),
        ([0, 4, 5, 3, 1, 2], SIX, PairingClass.B_SWAPPED),
        ([0, 1, 4, 3, 2, 5], SIX, PairingClass.W_MIXED),
        ([-1] * 6, FOUR, PairingClass.UNMATCHED),
    ],
)
def test_classes_by_hand(chosen, true, expected):
    assert _class(chosen, true) is expected


def test_the_classes_are_tested_in_their_order():
    no, everything = [False], {}
    for name, expected in (
        ("matched", PairingClass.UNMATCHED),
        ("is_signal_process", PairingClass.NOT_SIGNAL),
        ("has_truth", PairingClass.NO_TRUTH),
    ):
        everything[name] = no
        assert _class(SIX, SIX, **{name: no}) is expected
        assert _class(SIX, SIX, **everything) is expected


permutation = st.permutations(SIX)


@given(permutation, permutation, st.permutations(range(6)))
def test_the_class_does_not_depend_on_the_numbers_of_the_jets(chosen, true, names):
    before = _class(chosen, true)
    after = _class([names[j] for j in chosen], [names[j] for j in true])
    assert before is after


@given(permutation, permutation)
def test_the_class_is_blind_to_w_order_and_to_which_is_the_top(chosen, true):
    b, q, r, c, s, t = chosen
    expected = _class(chosen, true)
    for other in ([b, r, q, c, s, t], [b, q, r, c, t, s], [c, s, t, b, q, r]):
        assert _class(other, true) is expected


@given(permutation, permutation)
def test_comparing_is_symmetric(chosen, true):
    assert _class(chosen, true) is _class(true, chosen)


def test_classes_of_no_events():
    nothing = np.zeros((0, 6), dtype=np.int8)
    flags = np.zeros(0, dtype=bool)
    found = classify(
        nothing, nothing, has_truth=flags, is_signal_process=flags, matched=flags
    )
    assert found.shape == (0,)


def test_of_the_ninety_assignments_one_is_correct_and_one_has_the_b_swapped():
    """90 = 6!/(2! 2! 2!): common practice for six jets."""
    from itertools import permutations

    seen = {}
    for p in permutations(range(6)):
        key = frozenset([(p[0], frozenset(p[1:3])), (p[3], frozenset(p[4:]))])
        seen[key] = _class(list(p), SIX)
    assert len(seen) == 90
    counts = {kind: list(seen.values()).count(kind) for kind in set(seen.values())}
    assert counts == {
        PairingClass.CORRECT: 1,
        PairingClass.B_SWAPPED: 1,
        PairingClass.W_MIXED: 88,
    }
