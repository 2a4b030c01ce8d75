"""Speed of the cheap side: sums, scans and closure on a million rows."""

from __future__ import annotations

import time

import numpy as np
import pytest

from tests.toys import selected, toy_table
from toprecon.asymmetry import ScanAxis, ScanResult, accumulate, accumulate_scan

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
