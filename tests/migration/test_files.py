from __future__ import annotations

import json

import numpy as np
import pytest

from tests.require import require
from tests.toys import selected, toy_table
from toprecon.errors import InputError
from toprecon.migration import (
    MigrationOptions,
    accumulate,
    read_histogram_json,
    read_npz,
    read_root,
    write_histogram_json,
    write_npz,
    write_root,
)

FORMATS = {
    "root": (write_root, read_root),
    "npz": (write_npz, read_npz),
    "json": (write_histogram_json, read_histogram_json),
}
NAMES = {"root": "ROOT", "npz": "NPZ", "json": "JSON"}


def matrix(**settings):
    table = toy_table(
        700,
        seed=4,
        loss=0.3,
        wrong_b=0.3,
        outside=0.1,
        background=0.1,
        weights=lambda rng, n: rng.exponential(1.0, n),
    )
    return accumulate(
        table, selected(table), table["weight"], MigrationOptions(**settings)
    )


@pytest.mark.parametrize("kind", FORMATS)
@pytest.mark.parametrize(
    "settings",
    [{}, {"edges": (-1, 0.1, 1), "reco_edges": (-1, -1 / 3, 0.7, 1)}],
    ids=["equal", "unequal"],
)
def test_a_matrix_read_back_is_the_same_bit_for_bit(kind, settings, tmp_path):
    write, read = FORMATS[kind]
    m = matrix(**settings)
    path = write(m, tmp_path / f"m.{kind}")
    assert read(path).equals(m)
    assert [p.name for p in tmp_path.iterdir()] == [f"m.{kind}"]
    other = m.scaled(1 / 3)
    write(other, path)  # replaces what is there
    assert read(path).equals(other)


@pytest.mark.parametrize("kind", ["root", "npz"])
def test_replicas_are_read_back_too(kind, tmp_path):
    write, read = FORMATS[kind]
    m = matrix(replicas=12)
    assert read(write(m, tmp_path / f"m.{kind}")).equals(m)


@pytest.mark.parametrize("kind", FORMATS)
def test_a_missing_damaged_or_foreign_file_is_named(kind, tmp_path):
    read = FORMATS[kind][1]
    message = rf"a migration matrix \({NAMES[kind]}\) is required, but it cannot be re"
    with pytest.raises(InputError, match=message):
        read(tmp_path / "absent")
    damaged = tmp_path / f"damaged.{kind}"
    whole = FORMATS[kind][0](matrix(), tmp_path / f"m.{kind}").read_bytes()
    for size in (0, 40, len(whole) // 2, len(whole) - 20):
        damaged.write_bytes(whole[:size])
        with pytest.raises(InputError, match="damaged"):
            read(damaged)


def test_a_numpy_archive_of_something_else_is_refused(tmp_path):
    np.savez(tmp_path / "x.npz", a=np.zeros(3))
    with pytest.raises(InputError, match=r"x\.npz: a migration matrix"):
        read_npz(tmp_path / "x.npz")
    m = matrix()
    arrays = {**m.arrays, "missed": np.zeros(3)}  # of another shape than the bins
    np.savez(
        tmp_path / "y.npz",
        true_edges=m.true_binning.array,
        reco_edges=m.reco_binning.array,
        **arrays,
    )
    with pytest.raises(InputError, match=r"y\.npz: a migration matrix"):
        read_npz(tmp_path / "y.npz")


def test_root_histograms_are_ordinary_ones(tmp_path):
    uproot = require("uproot")
    m = matrix()
    with uproot.open(write_root(m, tmp_path / "m.root")) as file:
        assert file["counts"].classname == "TH2D"
        assert file["missed"].classname == "TH1D"
        assert file["counts"].axis("x").member("fName") == "xaxis"
        assert np.array_equal(file["counts"].values(), m.counts)
        assert np.array_equal(file["counts"].variances(), m.counts_variances)
        edges = file["generated"].axis().edges()
        assert np.array_equal(edges, m.true_binning.array)


def test_the_json_follows_the_schema_of_the_unified_histogram_interface(tmp_path):
    uhi = require("uhi.schema")
    text = write_histogram_json(matrix(), tmp_path / "m.json").read_text()
    data = json.loads(text)
    uhi.validate(data)  # the schema of the standard itself, as its package ships it
    assert set(data) == {"counts", "generated", "missed", "from_outside", "background"}
    hist = require("boost_histogram")
    serialization = require("boost_histogram.serialization")
    counts = hist.Histogram(
        serialization.from_uhi(
            {
                **data["counts"],
                "axes": [
                    {**a, "edges": np.array(a["edges"])} for a in data["counts"]["axes"]
                ],
                "storage": {
                    k: np.array(v) if isinstance(v, list) else v
                    for k, v in data["counts"]["storage"].items()
                },
            }
        )
    )
    assert np.array_equal(counts.values(), matrix().counts)


@pytest.mark.parametrize("kind", FORMATS)
def test_a_write_that_fails_leaves_nothing_behind(kind, tmp_path):
    write = FORMATS[kind][0]
    target = tmp_path / "taken"
    target.mkdir()
    (target / "inside").touch()
    with pytest.raises(IsADirectoryError):
        write(matrix(), target)
    assert [p.name for p in tmp_path.iterdir()] == ["taken"]
