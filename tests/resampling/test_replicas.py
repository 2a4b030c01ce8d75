from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.require import require
from toprecon.resampling import in_half_a, mix64, replica_counts
from toprecon.resampling.replicas import THRESHOLDS

IDS = np.arange(1, 100_001, dtype=np.uint64)


def test_thresholds_are_those_of_the_poisson_distribution():
    poisson = require("scipy.stats").poisson
    found = [int(x) / 2**64 for x in THRESHOLDS]
    wanted = poisson.cdf(np.arange(len(found)), 1.0)
    assert found == pytest.approx(wanted.tolist(), rel=1e-14)  # rounding of the cdf
    # what is left beyond the last threshold is less than one word of 2^64
    assert poisson.sf(len(found), 1.0) < 2**-63


def test_counts_follow_the_poisson_distribution():
    stats = require("scipy.stats")
    counts = replica_counts(IDS, seed=3, n=20).ravel()
    observed = np.bincount(counts, minlength=8)
    expected = stats.poisson.pmf(np.arange(8), 1.0) * counts.size
    observed = np.append(observed[:7], observed[7:].sum())
    expected[7] = counts.size - expected[:7].sum()
    # chi-square with 7 degrees of freedom: 32.0 is exceeded with probability 4e-5
    assert ((observed - expected) ** 2 / expected).sum() < 32.0


def test_mean_and_variance_of_every_replica_are_one():
    counts = replica_counts(IDS, seed=11, n=10).astype(np.float64)
    # errors: mean 1/sqrt(N), variance sqrt(3/N); 5 sigma, 20 numbers: fails in 1e-5
    assert np.all(abs(counts.mean(axis=1) - 1) < 5 / np.sqrt(len(IDS)))
    assert np.all(abs(counts.var(axis=1) - 1) < 5 * np.sqrt(3 / len(IDS)))


def test_replicas_and_events_are_independent():
    counts = replica_counts(IDS, seed=1, n=4).astype(np.float64)
    for a, b in itertools.combinations(range(4), 2):
        # correlation has the error 1/sqrt(N); 5 sigma
        assert abs(np.corrcoef(counts[a], counts[b])[0, 1]) < 5 / np.sqrt(len(IDS))
    neighbours = np.corrcoef(counts[0, :-1], counts[0, 1:])[0, 1]
    assert abs(neighbours) < 5 / np.sqrt(len(IDS))


def test_one_replica_follows_its_definition_in_exact_integers():
    seed, replica = 5, 2
    counts = replica_counts(IDS[:300], seed, 3)[replica]
    salt = int(mix64(seed + replica))
    for event, count in zip(IDS[:300], counts, strict=True):
        h = int(mix64(int(event) ^ salt))
        assert count == sum(h >= int(t) for t in THRESHOLDS)


@given(st.integers(0, 2**32 - 1), st.permutations(range(12)), st.integers(0, 12))
def test_replicas_do_not_depend_on_order_or_chunking(seed, order, cut):
    ids = mix64(np.arange(12, dtype=np.uint64))
    whole = replica_counts(ids, seed, 3)
    shuffled = ids[list(order)]
    parts = [replica_counts(p, seed, 3) for p in (shuffled[:cut], shuffled[cut:])]
    assert np.array_equal(np.concatenate(parts, axis=1), whole[:, list(order)])


def test_halves_are_disjoint_halves_and_independent_of_the_replicas():
    half = in_half_a(IDS)
    n = len(IDS)
    assert abs(half.mean() - 0.5) < 5 * 0.5 / np.sqrt(n)  # 5 sigma
    counts = replica_counts(IDS, seed=0, n=3).astype(np.float64)
    for replica in counts:
        assert abs(np.corrcoef(half, replica)[0, 1]) < 5 / np.sqrt(n)
    other = in_half_a(IDS, salt=77)
    assert abs(np.corrcoef(half, other)[0, 1]) < 5 / np.sqrt(n)
    assert np.array_equal(in_half_a(IDS[::-1]), half[::-1])


def test_no_events_and_no_replicas_give_empty_arrays():
    assert replica_counts(np.zeros(0, np.uint64), 1, 4).shape == (4, 0)
    assert replica_counts(IDS[:5], 1, 0).shape == (0, 5)
    assert in_half_a(np.zeros(0, np.uint64)).shape == (0,)
