from __future__ import annotations

import awkward as ak
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from tests.io import flat_files
from tests.io.layouts import SHOWERED
from toprecon.errors import InputError, UnknownFormatError
from toprecon.io import FileLayout, open_events
from toprecon.io.parquet_files import ParquetColumns


def flat_table(data):
    return pa.table({name: list(values) for name, values in data.items()})


def test_flat_columns_are_read_through_the_same_layout_as_root(tmp_path):
    data = flat_files.columns(20)
    root = flat_files.write(tmp_path / "x.root", data)
    parquet = tmp_path / "x.parquet"
    pq.write_table(flat_table(data), parquet, row_group_size=6)
    a, b = (open_events(p, layout=flat_files.LAYOUT).read() for p in (root, parquet))
    assert ak.array_equal(a, b, equal_nan=True, check_parameters=False)
    parts = list(open_events(parquet, layout=flat_files.LAYOUT).chunks(7))
    joined = ak.concatenate(parts)
    assert ak.array_equal(joined.jets.E, a.jets.E, check_parameters=False)
    assert ak.array_equal(joined.id, a.id)


def test_nested_columns_are_named_by_their_path(tmp_path):
    jets = [[{"p": {"x": 1.0, "y": 2.0, "z": 2.0}, "e": 3.5, "b": 0.5}], [], None]
    table = pa.table(
        {
            "jets": jets,
            "met": [{"x": 1.0}, {"x": 2.0}, {"x": 3.0}],
            "lep": [[1.0], [2.0], None],
        }
    )
    path = tmp_path / "x.parquet"
    pq.write_table(table, path)
    columns = ParquetColumns(str(path))
    assert set(columns.types) == {
        "jets.p.x", "jets.p.y", "jets.p.z", "jets.e", "jets.b", "met.x", "lep"
    }  # fmt: skip
    read = columns.read(["jets.p.x", "met.x", "lep"], 0, 3)
    assert read["jets.p.x"].counts.tolist() == [1, 0, 0]
    assert read["met.x"].values.tolist() == [1.0, 2.0, 3.0]
    assert read["lep"].counts.tolist() == [1, 1, 0]
    columns.close()
    layout = FileLayout(
        jets={"E": "jets.e", "px": "jets.p.x", "py": "jets.p.y", "pz": "jets.p.z"},
        leptons={"E": "lep", "px": 0.0, "py": 0.0, "pz": 0.0},
    )
    with pytest.warns(UserWarning, match="1 of 3"):
        events = open_events(path, layout=layout).read()
    assert events.jets.E.to_list() == [[3.5], []]
    assert events.leptons.E.to_list() == [[1.0], [2.0]]


def test_the_showered_layout_reads_the_same_columns_from_parquet(event_data, tmp_path):
    import uproot

    path = event_data / "showered" / "lepjets_1400_RL.root"
    with uproot.open(path) as file:
        arrays = file["events"].arrays(how=dict, entry_stop=100)
    tree = ak.zip(arrays, depth_limit=1)
    copy = tmp_path / "lepjets_1400_RL.parquet"
    ak.to_parquet(tree, copy)
    a = open_events(path, layout=SHOWERED).read(limit=100)
    b = open_events(copy, layout=SHOWERED).read()
    assert ak.array_equal(a, b, equal_nan=True, check_parameters=False)


def test_unusable_parquet_files_are_explained(tmp_path):
    path = tmp_path / "x.parquet"
    path.write_bytes(b"PAR1 and then nothing of use")
    with pytest.raises(
        InputError, match=r"x\.parquet: a readable Parquet file is requ"
    ):
        open_events(path)
    pq.write_table(pa.table({"a": [1.0]}), path)
    with pytest.raises(UnknownFormatError, match="describe the columns in a layout"):
        open_events(path)
    data = flat_files.columns(3)
    data["jet_btag"] = [["x"] * 4] * 3
    pq.write_table(flat_table(data), path)
    with pytest.raises(InputError, match="jet_btag: numbers are required"):
        open_events(path, layout=flat_files.LAYOUT).read()


def test_a_damaged_page_is_noticed_by_its_checksum(tmp_path):
    from toprecon.io import write_events

    root = flat_files.write(tmp_path / "x.root", flat_files.columns(2000))
    path = write_events(
        open_events(root, layout=flat_files.LAYOUT).read(), tmp_path / "y.parquet"
    )
    data = bytearray(path.read_bytes())
    data[len(data) // 3] ^= 0xFF
    path.write_bytes(data)
    with pytest.raises(InputError, match="damaged"):
        open_events(path).read()


def test_an_empty_table_gives_no_events(tmp_path):
    path = tmp_path / "x.parquet"
    one = flat_table(flat_files.columns(1))
    pq.write_table(one.slice(0, 0), path)
    events = open_events(path, layout=flat_files.LAYOUT).read()
    assert len(events) == 0
    assert events.weight.to_list() == []
