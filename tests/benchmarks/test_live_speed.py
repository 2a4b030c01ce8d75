"""Speed of the desk: a moved cut and a frame of a figure, beside doing all anew."""

from __future__ import annotations

import statistics
import time

import numpy as np
import pytest

import toprecon
from toprecon.figures import AngleFigure, angle_figure, png
from toprecon.study import LiveStudy, StudyPlan, reconstruct, summarise
from toprecon.study.moving import moved_sums

PLAN = StudyPlan().with_cut("pairing.chi2", high=20).with_cut("pairing.w_mass", 60, 110)
ROUNDS = 9


@pytest.fixture(scope="module")
def table():
    """A million rows: a real table, repeated, each row with its own identity."""
    small = reconstruct(toprecon.generate(50_000, seed=2), PLAN)
    big = small.take(np.tile(np.arange(len(small)), 20))
    big.columns["id"] = np.arange(len(big), dtype=np.uint64)
    return big


def side_by_side(*calls):
    """Median times [s] of calls that take turns."""
    times = [[] for _ in calls]
    for _ in range(ROUNDS):
        for call, spent in zip(calls, times, strict=True):
            start = time.perf_counter()
            call()
            spent.append(time.perf_counter() - start)
    return [statistics.median(spent) for spent in times]


@pytest.mark.benchmark
def test_a_small_move_is_three_times_as_fast_as_the_full_sums(table):
    sums = summarise(table, PLAN)
    near = PLAN.with_cut("pairing.chi2", high=20.25)
    moved, full = side_by_side(
        lambda: moved_sums(sums, table, PLAN, near), lambda: summarise(table, near)
    )
    print(f"move of one step {1e3 * moved:.1f} ms, full sums {1e3 * full:.1f} ms")
    assert full > 3 * moved


@pytest.mark.benchmark
def test_a_frame_is_twice_as_fast_as_a_new_figure(table):
    result = LiveStudy(table, PLAN, synchronous=True).result.asymmetry
    live = AngleFigure()
    live.update(result)
    live.png()

    def frame():
        live.update(result)
        live.png()

    kept, anew = side_by_side(frame, lambda: png(angle_figure(result)))
    print(f"frame {1e3 * kept:.1f} ms, new figure {1e3 * anew:.1f} ms")
    assert anew > 2 * kept


@pytest.mark.benchmark
def test_thirty_moves_a_second_are_followed_at_a_million_rows(table):
    live = LiveStudy(table, PLAN)
    live.wait()
    answers = []
    live.on_change(lambda study: answers.append(study.shown_plan.cuts[0].high))
    for step in range(30):
        live.set_cut("pairing.chi2", high=20 - 0.25 * step)
        time.sleep(1 / 30)
    followed = len(answers)
    live.wait()
    live.close()
    print(f"{followed} of 30 moves answered while the slider moved")
    assert answers[-1] == 20 - 0.25 * 29
    assert followed >= 15
