"""Files that were cut, flipped or mixed up: an error or a counted rejection."""

from __future__ import annotations

import io
import time
import warnings

import awkward as ak
import numpy as np
import pytest

from tests.io import edm4hep_files, flat_files
from tests.io.test_les_houches import pair_event
from tests.io.test_les_houches import write as write_les_houches
from toprecon.errors import TopreconError
from toprecon.io import FileLayout, open_events, write_events

N = 400
KINDS = ("flat", "own", "own parquet", "edm4hep", "edm4hep ntuple", "les houches")
LONGEST = 30.0
"""Seconds; a whole file is read in a fraction of one."""


def prepare(folder, kind):
    """One good file of a kind, and the layout to open it with."""
    flat = flat_files.write(folder / "flat.root", flat_files.columns(N))
    if kind == "flat":
        return flat, flat_files.LAYOUT
    events = open_events(flat, layout=flat_files.LAYOUT).read()
    if kind.startswith("own"):
        suffix = "parquet" if "parquet" in kind else "root"
        return write_events(events, folder / f"own.{suffix}"), None
    if kind == "les houches":
        made = [pair_event(k, weight=1.0 + k) for k in range(60)]
        return write_les_houches(folder / "x.lhe.gz", made), None
    truth = events.truth
    fermion = ak.zip(
        {c: truth.top[c] * 0.1 for c in flat_files.P4}
        | {"pdg": ak.Array(np.full(N, 2))}
    )
    names = ("w_plus", "w_minus", "b", "bbar")
    for name in names:
        truth = ak.with_field(truth, truth.top, name)
    for name in ("w_plus_up", "w_plus_down", "w_minus_up", "w_minus_down"):
        truth = ak.with_field(truth, fermion, name)
    events = ak.with_field(events, truth, "truth")
    missing = ak.zip({c: truth.top[c] for c in flat_files.P4})
    events = ak.with_field(events, missing, "missing")
    made = edm4hep_files.from_events(events, np.arange(N))
    convention = "ntuple" if "ntuple" in kind else "tree"
    path = edm4hep_files.write(folder / "e.root", made, convention)
    return path, FileLayout(format="edm4hep")


def mutate(data, rng):
    """A copy of some bytes with one kind of damage."""
    data = bytearray(data)
    kind = rng.integers(4)
    if kind == 0:
        return bytes(data[: rng.integers(1, len(data))])
    if kind == 1:
        for _ in range(rng.integers(1, 9)):
            data[rng.integers(len(data))] ^= 1 << rng.integers(8)
    elif kind == 2:
        start = rng.integers(len(data))
        size = int(rng.integers(1, 2000))
        data[start : start + size] = rng.bytes(len(data[start : start + size]))
    else:
        start, size = rng.integers(len(data)), int(rng.integers(1, 500))
        del data[start : start + size]
    return bytes(data)


def content(events):
    """What a study uses, as plain bytes per event, by identity."""
    parts = [ak.to_numpy(events.weight), ak.to_numpy(ak.num(events.jets))]
    for objects in (events.jets, events.leptons):
        fields = [f for f in (*flat_files.P4, "btag", "charge") if f in objects.fields]
        parts += [ak.to_numpy(ak.sum(objects[field], axis=1)) for field in fields]
    if "truth" in events.fields:
        for name in ("top", "antitop"):
            parts += [ak.to_numpy(events.truth[name][c]) for c in ("E", "pz")]
    return np.stack([np.asarray(p, dtype=np.float64) for p in parts], axis=1)


def check(path, layout, data, good):
    """Open damaged bytes; return 'error', 'rejected' or 'same'."""
    path.write_bytes(data)
    start = time.monotonic()
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            source = open_events(path, layout=layout)
            events = source.read()
    except TopreconError as error:
        lines = str(error).count("\n")
        return "error" if lines == 0 else "a message of several lines"
    finally:
        assert time.monotonic() - start < LONGEST
    assert source.report.accepted == len(events)
    values = content(events)
    if source.report.n_rejected == 0 and len(events) == len(good):
        assert np.array_equal(values, good, equal_nan=True), "silently different"
        return "same"
    # what is left is some of the good events, unchanged
    rows = {row.tobytes() for row in good}
    assert all(row.tobytes() in rows for row in values), "silently different"
    assert source.report.n_rejected > 0, "events lost without a word"
    return "rejected"


def fuzz(folder, kinds, per_kind, seed):
    outcomes = []
    for kind in kinds:
        (folder / kind.replace(" ", "_")).mkdir()
        path, layout = prepare(folder / kind.replace(" ", "_"), kind)
        original = path.read_bytes()
        good = content(open_events(path, layout=layout).read())
        rng = np.random.default_rng([seed, len(kind)])
        for i in range(per_kind):
            data = mutate(original, rng)
            try:
                outcomes.append(check(path, layout, data, good))
            except Exception as error:
                error.add_note(f"{kind}, mutation {i} of seed {seed}")
                raise
    return outcomes


def test_sixty_damaged_files_give_an_error_or_a_counted_rejection(tmp_path):
    outcomes = fuzz(tmp_path, KINDS, 10, seed=20261201)
    assert len(outcomes) == 60
    assert set(outcomes) <= {"error", "rejected", "same"}
    assert outcomes.count("error") > 20


@pytest.mark.soak
@pytest.mark.timeout(1800)
def test_five_hundred_damaged_files(tmp_path):
    outcomes = fuzz(tmp_path, KINDS, 84, seed=7)
    assert len(outcomes) >= 500
    assert set(outcomes) <= {"error", "rejected", "same"}


def test_columns_of_the_wrong_type_are_an_error_or_a_rejection(tmp_path):
    data = flat_files.columns()
    for name, kind in (("number", float), ("jet_btag", str), ("weight", complex)):
        changed = dict(data)
        if kind is complex:
            changed[name] = np.stack([data[name]] * 2, axis=1)
        elif kind is float:
            changed[name] = data[name] + 0.5
        else:
            del changed[name]
        path = flat_files.write(tmp_path / "x.root", changed)
        with pytest.raises(TopreconError, match=name):
            open_events(path, layout=flat_files.LAYOUT).read()


def test_a_message_has_one_line(tmp_path):
    path, layout = prepare(tmp_path, "flat")
    data = path.read_bytes()
    path.write_bytes(data[:300] + io.BytesIO(data).read()[400:])
    with pytest.raises(TopreconError) as caught:
        open_events(path, layout=layout).read()
    assert "\n" not in str(caught.value)
