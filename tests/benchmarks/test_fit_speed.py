"""Speed of the constrained fit, against other ways in the same run."""

from __future__ import annotations

import time
import tracemalloc

import numpy as np
import pytest

from tests.pairing import fit_reference
from tests.pairing.fit_toys import (
    EXACT,
    assignment_of,
    events_of,
    measure,
    momenta_of,
    partons,
)
from toprecon.events import Channel
from toprecon.pairing.fit_blocks import BLOCK, fit
from toprecon.pairing.fit_model import Model
from toprecon.pairing.fit_solver import solve

pytestmark = pytest.mark.benchmark


def block(n, *, leptonic=True):
    rng = np.random.default_rng(11)
    p, _ = partons(rng, n, widths=True)
    return measure(rng, p, leptonic=leptonic)[1]


def seconds(function):
    start = time.perf_counter()
    function()
    return time.perf_counter() - start


@pytest.mark.parametrize("leptonic", [True, False])
def test_blocks_against_a_loop_and_against_scipy(leptonic):
    measured = block(BLOCK, leptonic=leptonic)
    model = Model(EXACT, leptonic)
    few = range(20)
    ways = {
        "blocks": (lambda: solve(model, measured), BLOCK),
        "loop": (
            lambda: [fit_reference.loop(fit_reference.one(measured, i)) for i in few],
            20,
        ),
        "SLSQP": (
            lambda: [fit_reference.slsqp(fit_reference.one(measured, i)) for i in few],
            20,
        ),
    }
    rounds = {name: [] for name in ways}
    for function, _ in ways.values():
        function()
    for _ in range(7):
        for name, (function, n) in ways.items():
            rounds[name].append(seconds(function) / n)
    median = {name: np.median(values) for name, values in rounds.items()}
    print()
    for name, value in median.items():
        print(
            f"{'lepton+jets' if leptonic else 'all-hadronic'} {name:7s} "
            f"{1 / value:10.0f} fits/s   {value / median['blocks']:7.1f}"
        )
    assert median["SLSQP"] > 100 * median["blocks"]
    assert median["loop"] > 20 * median["blocks"]


@pytest.mark.parametrize("leptonic", [True, False])
def test_the_whole_fit_costs_little_more_than_the_iteration(leptonic):
    measured = block(4 * BLOCK, leptonic=leptonic)
    events = events_of(momenta_of(measured), leptonic=leptonic)
    rows = assignment_of(4 * BLOCK, leptonic=leptonic)
    channel = Channel.LEPTON_JETS if leptonic else Channel.ALL_HADRONIC
    model = Model(EXACT, leptonic)
    parts = [
        measured.take(np.arange(start, start + BLOCK))
        for start in range(0, 4 * BLOCK, BLOCK)
    ]
    whole, core, photon = [], [], []
    for _ in range(5):
        whole.append(seconds(lambda: fit(events, rows, EXACT, channel=channel)))
        core.append(seconds(lambda: [solve(model, part) for part in parts]))
        photon.append(
            seconds(lambda: fit(events, rows, EXACT.replace(isr=True), channel=channel))
        )
    n = 4 * BLOCK
    print(
        f"\nwhole fit {n / np.median(whole):.0f} events/s, iteration alone "
        f"{n / np.median(core):.0f}, with photon {n / np.median(photon):.0f}"
    )
    assert np.median(whole) < 2.5 * np.median(core)


def test_memory_beyond_the_result_does_not_grow_with_events():
    peaks = []
    for blocks in (2, 8):
        measured = block(blocks * BLOCK)
        events = events_of(momenta_of(measured))
        rows = assignment_of(blocks * BLOCK)
        fit(events, rows, EXACT, channel=Channel.LEPTON_JETS)
        tracemalloc.start()
        result = fit(events, rows, EXACT, channel=Channel.LEPTON_JETS)
        _, peak = tracemalloc.get_traced_memory()
        tracemalloc.stop()
        size = sum(
            value.nbytes
            for value in vars(result).values()
            if isinstance(value, np.ndarray)
        )
        peaks.append(peak - size)
        print(f"\n{blocks * BLOCK} fits: result {size / 1e6:.1f} MB, more", peaks[-1])
    # inputs made rectangular take 0.4 kB an event
    assert peaks[1] - peaks[0] < 6 * BLOCK * 500
