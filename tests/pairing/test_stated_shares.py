"""Reliability curves and the charge purity from double tags."""

from __future__ import annotations

import numpy as np
import pytest

from toprecon.errors import OptionError
from toprecon.pairing import charge_purity, reliability


def test_true_probabilities_are_reliable(rng):
    share = rng.uniform(0.3, 1, size=50_000)
    right = rng.uniform(size=len(share)) < share
    curve = reliability(share, right, weight=rng.uniform(0.5, 2, size=len(share)))
    filled = curve.weight > 0
    pull = ((curve.fraction - curve.stated) / curve.error)[filled]
    # seven bins: the chance of any pull beyond 4.5 is below 5e-5
    assert filled.sum() == 7
    assert np.abs(pull).max() < 4.5


def test_events_without_share_are_left_out():
    curve = reliability([np.nan, 1.0, 0.95], [True, True, False])
    assert curve.weight.sum() == 2
    assert curve.fraction[-1] == 0.5


def test_double_tags_give_the_purity():
    # p = 0.8: r = 0.64 + 0.04, wrong 0.04/0.68
    found = charge_purity(6800, 3200)
    assert found.purity == pytest.approx(0.8)
    assert found.wrong == pytest.approx(0.0588, abs=1e-4)


def test_the_errors_of_the_purity_are_those_of_repeated_counts(rng):
    counts = rng.binomial(10_000, 0.68, size=4000)
    found = [charge_purity(n, 10_000 - n) for n in counts]
    expected = charge_purity(6800, 3200)
    # 4000 repetitions know a spread to 1.1 %: the chance to be 6 % off is below 1e-6
    for name in ("purity", "wrong"):
        spread = np.std([getattr(f, name) for f in found])
        assert spread == pytest.approx(getattr(expected, f"{name}_error"), rel=0.06)


def test_more_same_than_opposite_signs_are_refused():
    with pytest.raises(OptionError, match="more opposite- than same-sign"):
        charge_purity(10, 20)
