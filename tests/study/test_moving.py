"""Sums after a moved cut equal the sums made in full."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

import toprecon
from toprecon.study import StudyPlan, finish, reconstruct, summarise
from toprecon.study.moving import moved_cut, moved_sums

PLAN = (
    StudyPlan()
    .with_cut("pairing.chi2", high=20)
    .with_cut("pairing.w_mass", 65, 100)
    .with_settings({"migration.replicas": 2})
)


@pytest.fixture(scope="module")
def table():
    return reconstruct(toprecon.generate(4000, seed=3), PLAN)


def weighted(table, rng):
    columns = {**table.columns, "weight": rng.uniform(0.1, 2.5, len(table))}
    return dataclasses.replace(table, columns=columns)


@pytest.mark.parametrize(
    ("name", "low", "high"),
    [
        ("pairing.chi2", None, 21),
        ("pairing.chi2", None, 18.5),
        ("pairing.chi2", 0.02, 20),
        ("pairing.w_mass", 65, 99),
        ("pairing.w_mass", None, 100),
    ],
)
def test_counts_are_equal_bit_for_bit(table, name, low, high):
    plan = PLAN.with_cut(name, low, high)
    moved = moved_sums(summarise(table, PLAN), table, PLAN, plan)
    full = summarise(table, plan)
    (sample,) = full.samples
    mine, theirs = moved.samples[sample], full.samples[sample]
    assert mine.migration.equals(theirs.migration)
    assert np.array_equal(mine.asymmetry.first, theirs.asymmetry.first)
    assert np.array_equal(mine.asymmetry.second, theirs.asymmetry.second)
    assert np.array_equal(mine.asymmetry.counts, theirs.asymmetry.counts)
    for key, values in theirs.asymmetry.spectra.sums.items():
        assert np.array_equal(mine.asymmetry.spectra.sums[key], values)
    assert str(mine.cut_flow) == str(theirs.cut_flow)
    assert mine.undefined == theirs.undefined
    assert np.array_equal(mine.statuses, theirs.statuses)
    assert mine.sample == theirs.sample


def test_weighted_sums_differ_by_rounding_only(table, rng):
    table = weighted(table, rng)
    sums, old = summarise(table, PLAN), PLAN
    for high in np.linspace(20, 14, 40):  # many moves: rounding does not pile up
        plan = old.with_cut("pairing.chi2", high=float(high))
        if plan == old:
            continue
        sums, old = moved_sums(sums, table, old, plan), plan
    moved, full = finish(sums, old), finish(summarise(table, old), old)
    assert moved.asymmetry.shift.value == pytest.approx(
        full.asymmetry.shift.value, abs=1e-12
    )
    assert moved.asymmetry.shift.error == pytest.approx(
        full.asymmetry.shift.error, abs=1e-12
    )
    assert np.allclose(moved.migration.counts, full.migration.counts, atol=1e-9)
    assert (moved.migration.counts_variances >= 0).all()


def test_only_a_moved_limit_counts_as_a_move():
    assert moved_cut(PLAN, PLAN.with_cut("pairing.chi2", high=3)) == 0
    assert moved_cut(PLAN, PLAN.with_cut("pairing.w_mass", 1, 100)) == 1
    assert moved_cut(PLAN, PLAN) is None
    assert moved_cut(PLAN, PLAN.with_cut("pairing.chi2", high=20, on=False)) is None
    assert moved_cut(PLAN, PLAN.with_cut("pairing.gap", 1)) is None
    both = PLAN.with_cut("pairing.chi2", high=3).with_cut("pairing.w_mass", 1, 100)
    assert moved_cut(PLAN, both) is None
    assert moved_cut(PLAN, PLAN.with_settings({"migration.seed": 9})) is None


def test_a_large_move_is_left_to_the_full_sums(table):
    plan = PLAN.with_cut("pairing.chi2", high=0.5)
    assert moved_sums(summarise(table, PLAN), table, PLAN, plan) is None


def test_sums_of_another_plan_are_not_moved(table):
    other = PLAN.with_cut("pairing.chi2", high=7)
    plan = PLAN.with_cut("pairing.chi2", high=19)
    assert moved_sums(summarise(table, other), table, PLAN, plan) is None
