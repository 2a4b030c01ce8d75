"""Time and memory of reading, next to what the file library needs for the same."""

from __future__ import annotations

import time
import tracemalloc

import awkward as ak
import numpy as np
import pytest
import uproot

from tests.io.layouts import SHOWERED
from toprecon.io import open_events
from toprecon.io.root_columns import RootColumns

pytestmark = [pytest.mark.benchmark, pytest.mark.timeout(900)]

N = 500_000
BLOCK = 50_000


COMPRESSIONS = {"zlib-1": uproot.ZLIB(1), "zstd-5": uproot.ZSTD(5)}


@pytest.fixture(scope="module", params=COMPRESSIONS)
def big_file(request, event_data, tmp_path_factory):
    """Half a million showered events in one flat file, as a user would have it."""
    with uproot.open(event_data / "showered" / "lepjets_500_LR.root") as file:
        events = file["events"].arrays(how=dict)
    counters = {"njt", "nil"}
    columns = {k: v for k, v in events.items() if k not in counters}
    times = -(-BLOCK // 15_000)
    block = {k: ak.concatenate([v] * times)[:BLOCK] for k, v in columns.items()}
    path = tmp_path_factory.mktemp("big") / "big.root"
    rng = np.random.default_rng(1)
    with uproot.recreate(path, compression=COMPRESSIONS[request.param]) as file:
        kinds = {
            k: v.layout.dtype if v.ndim == 1 else str(ak.type(v).content)
            for k, v in block.items()
        }
        tree = file.mktree(
            "events",
            kinds,
            counter_name=lambda name: {"jt_pt": "njt", "il_pt": "nil"}.get(
                name, f"n{name}"
            ),
        )
        for start in range(0, N, BLOCK):
            part = dict(block)
            # real numbers fill their mantissas; those of the showered files were cut
            for name, values in part.items():
                part[name] = noisy(values, rng)
            part["evt_no"] = np.arange(start, start + BLOCK, dtype=np.int32)
            tree.extend(part)
    return path


def noisy(values, rng):
    """Numbers with random last bits; whole numbers as they are."""
    flat = ak.to_numpy(values if values.ndim == 1 else ak.flatten(values))
    if flat.dtype.kind != "f" or np.all(flat == np.round(flat)):
        return values
    changed = (flat * rng.uniform(1, 1.0001, len(flat))).astype(flat.dtype)
    return changed if values.ndim == 1 else ak.unflatten(changed, ak.num(values))


@pytest.fixture
def library_time(monkeypatch):
    """Seconds spent inside the file library, in a list of one."""
    spent = [0.0]

    def timed(original):
        def wrapper(*args):
            start = time.perf_counter()
            try:
                return original(*args)
            finally:
                spent[0] += time.perf_counter() - start

        return wrapper

    # opening the file and its tree, and unpacking the columns
    for name in ("__init__", "_arrays"):
        monkeypatch.setattr(RootColumns, name, timed(getattr(RootColumns, name)))
    return spent


def test_less_than_half_of_the_time_is_outside_the_library(big_file, library_time):
    shares = []
    for _ in range(3):
        library_time[0] = 0.0
        start = time.perf_counter()
        source = open_events(big_file, layout=SHOWERED)
        opened = time.perf_counter() - start
        n = sum(len(events) for events in source.chunks(BLOCK))
        total = time.perf_counter() - start
        shares.append(1 - library_time[0] / total)
        print(
            f"{n} events in {total:.2f} s ({n / total:.0f}/s), opened in {opened:.2f} s, "
            f"{shares[-1]:.0%} outside the library"
        )
    assert n == N
    assert np.median(shares) < 0.5


def test_memory_is_bounded_by_the_chunk(big_file):
    source = open_events(big_file, layout=SHOWERED)
    peaks = {}
    for size in (10_000, 50_000, 200_000):
        tracemalloc.start()
        for events in source.chunks(size):
            assert len(events) <= size
        peaks[size] = tracemalloc.get_traced_memory()[1] / 1e6
        tracemalloc.stop()
    print(", ".join(f"{size}: {peak:.0f} MB" for size, peak in peaks.items()))
    # one chunk does not know how many follow: the peak grows with the chunk only,
    # from the baskets of 50 000 events that must be unpacked in any case
    assert peaks[50_000] < 400
    assert peaks[10_000] < peaks[50_000] < peaks[200_000]
    few = {}
    for limit in (100_000, N):
        tracemalloc.start()
        for _ in source.chunks(20_000, limit=limit):
            pass
        few[limit] = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
    assert few[N] < 1.2 * few[100_000]
