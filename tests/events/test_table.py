from __future__ import annotations

import dataclasses
import json

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from toprecon.errors import InputError, MissingFieldError
from toprecon.events import COLUMNS, Binning, EventTable, Helicity, Sample

SAMPLES = (
    Sample("left", "ttbar", Helicity.LR, 500.0, entries=5, sum_of_weights=5.0),
    Sample("ww", "ww", Helicity.MIXED, 500.0, entries=3, sum_of_weights=6.0),
)


def _table(n=6, samples=SAMPLES, seed=1, **changes):
    rng = np.random.default_rng(seed)
    columns = {name: np.zeros(n, kind) for name, kind in COLUMNS.items()}
    columns["id"] = rng.integers(0, 2**64 - 1, n, dtype=np.uint64)
    columns["sample"] = np.arange(n) % len(samples)
    columns["weight"] = rng.uniform(0, 2, n)
    columns["stage"] = np.arange(n) % 3
    columns["cos_theta_true"] = rng.uniform(-1, 1, n)
    columns["cos_theta_true"][: n // 3] = np.nan
    columns["pairing.chi2"] = rng.exponential(5, n).astype(np.float32)
    columns.update(changes)
    return EventTable(
        columns, tuple(samples), ("one", "two"), {"plan_hash": "abc", "plan": {}}
    )


def _same(first, second):
    assert set(first) == set(second)
    for name in first:
        assert first[name].dtype == second[name].dtype, name
        assert np.array_equal(
            first[name], second[name], equal_nan=first[name].dtype.kind == "f"
        ), name
    assert [s.to_mapping() for s in first.samples] == [
        s.to_mapping() for s in second.samples
    ]
    assert first.stages == second.stages
    assert first.provenance == second.provenance


@pytest.mark.parametrize("n", [0, 1, 7])
def test_a_saved_table_is_loaded_bit_for_bit(n, tmp_path):
    table = _table(n)
    path = table.save(tmp_path / "deep" / "table.parquet")
    _same(EventTable.load(path), table)
    assert EventTable.is_saved(path)
    assert [p.name for p in path.parent.iterdir()] == ["table.parquet"]


def test_identities_near_the_largest_survive(tmp_path):
    ids = np.array([2**64 - 1, 2**63, 0, 1, 2, 3], dtype=np.uint64)
    path = _table(id=ids).save(tmp_path / "t.parquet")
    assert np.array_equal(EventTable.load(path)["id"], ids)


def test_any_parquet_reader_sees_plain_columns(tmp_path):
    table = _table()
    read = pq.read_table(table.save(tmp_path / "t.parquet"))
    assert set(read.column_names) == set(table)
    assert read.column("weight").to_pylist() == table["weight"].tolist()


def test_a_failed_save_leaves_the_old_file_and_no_rest(tmp_path, monkeypatch):
    path = _table().save(tmp_path / "t.parquet")
    before = path.read_bytes()

    def fail(table, where, **_):
        where.write_bytes(b"half")
        msg = "disk full"
        raise OSError(msg)

    monkeypatch.setattr(pq, "write_table", fail)
    with pytest.raises(OSError, match="disk full"):
        _table(3).save(path)
    assert path.read_bytes() == before
    assert [p.name for p in tmp_path.iterdir()] == ["t.parquet"]


def test_a_missing_file_is_one_sentence(tmp_path):
    with pytest.raises(InputError, match=r"none: an event table is required, but ther"):
        EventTable.load(tmp_path / "none")
    assert not EventTable.is_saved(tmp_path / "none")


@pytest.mark.parametrize("share", [0.0, 0.3, 0.99])
def test_a_truncated_file_is_refused(share, tmp_path):
    path = _table(100).save(tmp_path / "t.parquet")
    data = path.read_bytes()
    path.write_bytes(data[: int(share * len(data))])
    with pytest.raises(InputError, match=r"t\.parquet: not a readable Parquet file"):
        EventTable.load(path)
    assert not EventTable.is_saved(path)


@pytest.mark.parametrize("position", range(200, 3000, 400))
def test_a_flipped_bit_is_never_read_as_another_number(position, tmp_path):
    table = _table(500)
    path = table.save(tmp_path / "t.parquet")
    data = bytearray(path.read_bytes())
    data[position] ^= 4
    path.write_bytes(bytes(data))
    with pytest.raises(InputError, match=r"t\.parquet: "):
        EventTable.load(path)


def test_a_foreign_parquet_file_is_refused(tmp_path):
    path = tmp_path / "events.parquet"
    pq.write_table(pa.table({"a": [1]}), path)
    with pytest.raises(InputError, match="holds none; open events with"):
        EventTable.load(path)
    assert not EventTable.is_saved(path)


def test_a_table_of_another_version_is_refused(tmp_path):
    path = _table().save(tmp_path / "t.parquet")
    table = pq.read_table(path)
    data = json.loads(table.schema.metadata[b"toprecon"])
    text = json.dumps({**data, "version": 99}).encode()
    pq.write_table(table.replace_schema_metadata({b"toprecon": text}), path)
    with pytest.raises(InputError, match=r"version 1 is required; got 99; reconstruct"):
        EventTable.load(path)


@pytest.mark.parametrize("name", COLUMNS)
def test_every_column_is_required(name):
    columns = dict(_table().columns)
    del columns[name]
    with pytest.raises(MissingFieldError, match=f"column '{name}' is required, but is"):
        EventTable(columns, SAMPLES, ())


def test_columns_of_different_lengths_are_refused():
    with pytest.raises(InputError, match="columns must have the same length; got"):
        _table(weight=np.ones(2))


@pytest.mark.parametrize("row", [-1, 2])
def test_rows_of_unknown_samples_are_refused(row):
    with pytest.raises(
        InputError, match=f"rows of samples from 0 to 1 are required; got .*{row}"
    ):
        _table(sample=np.array([0, 0, 0, 0, 0, row]))


def test_an_unknown_column_is_refused_with_the_nearest_name():
    with pytest.raises(MissingFieldError, match="no column 'wieght'; did you mean 'we"):
        _ = _table()["wieght"]


def test_making_a_table_does_not_touch_the_columns_given():
    columns = dict(_table().columns)
    columns["weight"] = [1, 2, 3, 4, 5, 6]
    EventTable(columns, SAMPLES, ())
    assert columns["weight"] == [1, 2, 3, 4, 5, 6]


def test_the_table_knows_its_observables_and_samples():
    table = _table()
    assert len(table) == 6
    assert "weight" in table
    assert "nothing" not in table
    assert table.observables == ("pairing.chi2",)
    assert table.is_signal_process.tolist() == [True, False] * 3
    assert table.helicity.tolist() == [-1, 0] * 3


def test_bins_are_worked_out_once():
    table = _table()
    binning = Binning.regular(4, -1, 1)
    bins = table.bins("cos_theta_true", binning)
    assert bins is table.bins("cos_theta_true", Binning.regular(4, -1, 1))
    assert np.array_equal(bins, binning.digitise(table["cos_theta_true"]))
    assert bins[0] == -1  # NaN
    other = table.bins("cos_theta_true", Binning.regular(2, -1, 1))
    assert not np.array_equal(bins, other)


def test_samples_divide_the_rows():
    table = _table(7)
    parts = table.by_sample
    assert [part.samples for _, part in parts] == [(s,) for s in SAMPLES]
    assert sorted(np.concatenate([rows for rows, _ in parts])) == list(range(7))
    for rows, part in parts:
        assert np.array_equal(part["weight"], table["weight"][rows])
        assert not part["sample"].any()
        assert part.observables == ()


def test_a_sample_without_rows_is_still_there():
    table = _table(sample=np.zeros(6))
    assert [len(part) for _, part in table.by_sample] == [6, 0]
    only = _table(samples=SAMPLES[:1])
    assert [len(part) for _, part in only.by_sample] == [6]


def test_cut_flow_of_the_selection():
    table = _table()
    flow = table.cut_flow()
    assert flow.steps == ("all events", "one", "two")
    assert flow.counts.tolist() == [6, 4, 2]
    assert flow.sums[0] == pytest.approx(table["weight"].sum())
    assert table.cut_flow(np.full(6, 2.0)).sums.tolist() == [12, 8, 4]


def test_rows_can_be_taken_by_mask_or_index():
    table = _table()
    assert np.array_equal(table.take([2, 0])["id"], table["id"][[2, 0]])
    assert len(table.take(table["stage"] == 0)) == 2
    assert table.take([0]).samples == table.samples


def test_joined_tables_have_all_rows_and_add_their_samples():
    first, second = _table(4, seed=2), _table(5, seed=3)
    both = EventTable.concatenate([first, second])
    for name in first:
        assert np.array_equal(
            both[name],
            np.concatenate([first[name], second[name]]),
            equal_nan=both[name].dtype.kind == "f",
        )
    assert [s.entries for s in both.samples] == [10, 6]
    assert [s.sum_of_weights for s in both.samples] == [10.0, 12.0]


def test_joined_tables_with_samples_in_another_order():
    first, second = _table(4), _table(4, SAMPLES[::-1], seed=3)
    both = EventTable.concatenate([first, second])
    assert [s.name for s in both.samples] == ["left", "ww"]
    assert both["sample"].tolist() == [0, 1, 0, 1, 1, 0, 1, 0]


def test_one_table_joined_is_itself():
    _same(EventTable.concatenate([_table()]), _table())


def test_inputs_of_joined_tables_are_kept():
    first, second = _table(), _table(seed=2)
    first.provenance["inputs"] = ["a"]
    second.provenance["inputs"] = ["b"]
    both = EventTable.concatenate([first, second])
    assert both.provenance["inputs"] == ["a", "b"]
    assert both.provenance["plan_hash"] == "abc"


def test_tables_that_do_not_fit_are_refused():
    table = _table()
    other = dataclasses.replace(table, provenance={"plan_hash": "xyz"})
    with pytest.raises(InputError, match="event tables: made with different plans"):
        EventTable.concatenate([table, other])
    with pytest.raises(InputError, match="different columns or selection steps"):
        EventTable.concatenate([table, dataclasses.replace(table, stages=("one",))])
    extra = _table(**{"pairing.gap": np.zeros(6, np.float32)})
    with pytest.raises(InputError, match="different columns or selection steps"):
        EventTable.concatenate([table, extra])
    alike = [s.replace(sqrt_s=600.0) for s in SAMPLES]
    with pytest.raises(InputError, match="sample 'left': its parts must be described"):
        EventTable.concatenate([table, _table(samples=alike)])
    with pytest.raises(InputError, match="event tables: at least one is required"):
        EventTable.concatenate([])
