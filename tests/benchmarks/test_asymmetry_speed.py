"""Speed of the cheap side: sums, scans and closure on a million rows."""

from __future__ import annotations

import time

import numpy as np
import pytest

from tests.toys import selected, toy_table
from toprecon.asymmetry import (
    Rows,
    ScanAxis,
    ScanResult,
    accumulate,
    accumulate_scan,
    compare,
)
from toprecon.migration import MigrationOptions, accumulate_halves, check_closure

N = 1_000_000


@pytest.fixture(scope="module")
def table():
    return toy_table(N, seed=1, loss=0.2, wrong_b=0.2, unmatched=0.2, background=0.1)


def seconds(function, repeat=3):
    times = []
    for _ in range(repeat):
        start = time.perf_counter()
        function()
        times.append(time.perf_counter() - start)
    return min(times)


@pytest.mark.benchmark
def test_a_scan_of_2500_points_costs_a_few_studies(table, record_property):
    mask, weight = selected(table), table["weight"]
    axes = tuple(
        ScanAxis.spread(name, table[name], n=50)
        for name in ("toy.quality", "toy.noise")
    )

    def scan():
        result = ScanResult(accumulate_scan(table, mask, weight, axes))
        return result.best, result.is_on_front

    def study():
        return accumulate(table, mask, weight).result().reconstructed

    one_scan, one_study = seconds(scan), seconds(study)
    record_property("scan_seconds", one_scan)
    record_property("study_seconds", one_study)
    print(
        f"\nscan of 50 x 50 on {N} rows: {one_scan:.2f} s; one study {one_study:.3f} s"
    )
    # 2500 studies one by one would be 2500; cumulative sums make it a few dozen
    assert one_scan < 60 * one_study
    assert np.isfinite(one_scan)


@pytest.mark.benchmark
def test_a_comparison_and_a_closure_cost_a_few_studies(table, record_property):
    mask, weight = selected(table), table["weight"]
    rows = Rows(table, mask, weight)
    tighter = Rows(table, mask & (table["toy.quality"] < 5), weight)
    options = MigrationOptions()
    times = {
        "study": seconds(lambda: accumulate(table, mask, weight).result().budget),
        "comparison": seconds(lambda: compare(rows, tighter)),
        "halves": seconds(lambda: accumulate_halves(table, mask, weight, options)),
    }
    halves = accumulate_halves(table, mask, weight, options)
    times["closure"] = seconds(lambda: check_closure(*halves))
    for name, value in times.items():
        record_property(f"{name}_seconds", value)
    print("\n" + ", ".join(f"{n} {t:.3f} s" for n, t in times.items()))
    assert times["comparison"] < 20 * times["study"]
    assert times["halves"] < 10 * times["study"]
