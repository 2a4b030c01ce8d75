from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from toprecon.statistics import (
    asymmetry_from_counts,
    fraction_from_counts,
    weighted_share,
)

counts = st.floats(1e-3, 1e6)


@given(counts, counts)
def test_unit_weights_give_the_binomial_error(forward, backward):
    a = asymmetry_from_counts(forward, backward)
    n = forward + backward
    assert a.value == pytest.approx((forward - backward) / n, abs=1e-15)
    # textbook: sqrt((1 - A^2)/N); (1 - A^2) computed without cancellation
    expected = math.sqrt(4 * forward * backward / n**2 / n)
    assert a.error == pytest.approx(expected, rel=1e-12)


@given(counts, counts, counts, counts, st.floats(1e-3, 1e3))
def test_scaled_weights_change_nothing(forward, backward, s_f, s_b, factor):
    a = asymmetry_from_counts(forward, backward, s_f, s_b)
    scaled = asymmetry_from_counts(
        factor * forward, factor * backward, factor**2 * s_f, factor**2 * s_b
    )
    assert scaled.value == pytest.approx(a.value, rel=1e-9, abs=1e-12)
    assert scaled.error == pytest.approx(a.error, rel=1e-9)


@given(counts, counts, counts, counts)
def test_exchanging_the_hemispheres_changes_only_the_sign(f, b, s_f, s_b):
    one, other = (
        asymmetry_from_counts(f, b, s_f, s_b),
        asymmetry_from_counts(b, f, s_b, s_f),
    )
    assert one.value == -other.value
    assert one.error == pytest.approx(other.error, rel=1e-12)


def test_error_of_weighted_counts_is_the_spread_of_repeated_experiments(rng):
    n_toys, mean_f, mean_b = 4000, 700.0, 300.0
    values, errors = [], []
    for _ in range(n_toys):
        w_f = rng.exponential(1.0, rng.poisson(mean_f)) + 0.5
        w_b = rng.exponential(2.0, rng.poisson(mean_b))
        a = asymmetry_from_counts(w_f.sum(), w_b.sum(), (w_f**2).sum(), (w_b**2).sum())
        values.append(a.value)
        errors.append(a.error)
    # the spread of 4000 values is known to 1.1 %; 5 sigma
    assert np.std(values) == pytest.approx(np.mean(errors), rel=0.056)


def test_an_empty_sample_has_no_asymmetry():
    a = asymmetry_from_counts(0, 0)
    assert math.isnan(a.value)
    assert math.isnan(a.error)


def test_one_sided_samples_have_no_spread():
    a = asymmetry_from_counts(10, 0)
    assert (a.value, a.error) == (1.0, 0.0)


@given(counts, counts)
def test_a_fraction_has_the_binomial_error(passed, failed):
    e = fraction_from_counts(passed, failed)
    n = passed + failed
    assert e.value == pytest.approx(passed / n, abs=1e-12)
    assert e.error == pytest.approx(math.sqrt(passed * failed / n**3), rel=1e-12)


def test_share_of_weights_has_the_spread_of_poisson_replicas(rng):
    """The spread of 2000 replicas is known to 1.6 %; 8 % are five sigma."""
    weight, those = rng.uniform(-0.1, 2.0, 400), rng.random(400) < 0.3
    share = weighted_share(weight, those)
    assert share.value == pytest.approx(weight[those].sum() / weight.sum(), rel=1e-12)
    replicas = rng.poisson(1.0, (2000, 400)) * weight
    spread = (replicas[:, those].sum(axis=1) / replicas.sum(axis=1)).std()
    assert share.error == pytest.approx(spread, rel=0.08)
    assert math.isnan(weighted_share([], []).value)
