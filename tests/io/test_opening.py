from __future__ import annotations

import awkward as ak
import numpy as np
import pytest
import uproot

from tests.io import flat_files
from toprecon.errors import InputError, OptionError, UnknownFormatError
from toprecon.io import FileLayout, open_events
from toprecon.io.opening import split_tree, stem

OPEN = {"layout": flat_files.LAYOUT}


def write(folder, *names):
    return [
        flat_files.write(folder / f"{name}.root", flat_files.columns(seed=i))
        for i, name in enumerate(names)
    ]


def test_patterns_are_expanded_in_order(tmp_path):
    write(tmp_path, "b", "a", "c")
    source = open_events(tmp_path / "*.root", **OPEN)
    assert [s.name for s in source.samples] == ["a", "b", "c"]
    with pytest.raises(InputError, match=r"z\*\.root: a pattern for files is required"):
        open_events(tmp_path / "z*.root", **OPEN)


def test_a_mapping_names_the_samples(tmp_path):
    a, b, c = write(tmp_path, "a", "b", "c")
    source = open_events(
        {"x": [a, b], "y": c},
        **OPEN.copy() | {"layout": flat_files.LAYOUT.replace(identity="entry")},
    )
    assert [(s.name, s.entries) for s in source.samples] == [("x", 16), ("y", 8)]
    assert source.read().sample.to_list() == [0] * 16 + [1] * 8


def test_files_of_one_name_need_a_mapping(tmp_path):
    for name in ("LR", "RL"):
        (tmp_path / name).mkdir()
    paths = [write(tmp_path / name, "x")[0] for name in ("LR", "RL")]
    flat_files.write(paths[1], flat_files.columns(seed=5))
    with pytest.raises(
        InputError, match=r"got 'x' again .*; give \{sample name: files"
    ):
        open_events(paths, **OPEN)
    assert len(open_events(dict(zip("ab", paths, strict=True)), **OPEN).read()) == 16


def test_files_of_one_sample_must_agree(tmp_path):
    a, b = write(tmp_path, "a", "b")
    for path, energy in ((a, 500.0), (b, 365.0)):
        data = {**flat_files.columns(seed=int(energy)), "ecm": np.full(8, energy)}
        flat_files.write(path, data)
    event = flat_files.LAYOUT.event.replace(sqrt_s="ecm")
    with pytest.raises(InputError, match="the files of sample 'x' must agree about"):
        open_events({"x": [a, b]}, layout=flat_files.LAYOUT.replace(event=event))


def test_the_tree_can_be_named(tmp_path):
    path = tmp_path / "two.root"
    with uproot.recreate(path) as file:
        for name, n in (("first", 3), ("second", 5)):
            tree = file.mktree(name, dict.fromkeys(flat_files.P4, "var * float64"))
            data = flat_files.columns(n)
            tree.extend({c: ak.Array(data[f"jet_{c}"].tolist()) for c in flat_files.P4})
    layout = FileLayout(jets={c: c for c in flat_files.P4})
    assert len(open_events(f"{path}:second", layout=layout).read()) == 5
    assert len(open_events(path, layout=layout.replace(tree="first")).read()) == 3
    with pytest.raises(
        InputError, match=r"one tree of events is required; got first, s"
    ):
        open_events(path, layout=layout)
    with pytest.raises(
        InputError, match=r"tree 'third' is required; the file holds: f"
    ):
        open_events(f"{path}:third", layout=layout)


def test_names_are_split_into_path_and_tree():
    assert split_tree("a/b.root:dir") == ("a/b.root", "dir")
    assert split_tree("a/b.root") == ("a/b.root", "")
    assert split_tree("http://host:80/a.root") == ("http://host:80/a.root", "")
    assert split_tree("http://host:80/a.root:t") == ("http://host:80/a.root", "t")
    assert stem("http://host/a/b.root?x=1") == "b"
    assert stem("a/b.lhe.gz") == "b"


def test_unusable_files_are_explained(tmp_path):
    with pytest.raises(
        InputError, match=r"no\.root: an event file is required, but the"
    ):
        open_events(tmp_path / "no.root")
    path = tmp_path / "empty.root"
    path.write_bytes(b"")
    with pytest.raises(UnknownFormatError, match="but the file is empty"):
        open_events(path)
    path.write_bytes(b"hello world, this is text")
    with pytest.raises(UnknownFormatError, match=r"its first bytes are b'hello wo'"):
        open_events(path)
    with pytest.raises(InputError, match="cannot be read"):
        open_events(tmp_path)
    with uproot.recreate(path) as file:
        file["text"] = "no tree"
    with pytest.raises(
        InputError, match="a tree of events is required, but the file ho"
    ):
        open_events(path)
    with pytest.raises(InputError, match="at least one file is required; got none"):
        open_events([])


def test_a_file_that_is_cut_short_is_named(tmp_path):
    path = write(tmp_path, "a")[0]
    data = path.read_bytes()
    path.write_bytes(data[: len(data) // 2])
    with pytest.raises(InputError, match=r"a\.root: .*(cut short|readable ROOT file)"):
        open_events(path, **OPEN)


def test_columns_of_unknown_names_ask_for_a_layout(tmp_path):
    path = tmp_path / "x.root"
    with uproot.recreate(path) as file:
        file.mktree("events", {"a": "float64"}).extend({"a": np.ones(3)})
    with pytest.raises(UnknownFormatError, match="describe the columns in a layout"):
        open_events(path)


def test_wrong_statements_are_explained(tmp_path):
    path = write(tmp_path, "a")[0]
    with pytest.raises(OptionError, match="helicity: must be LR, RL or MIXED; got 'L'"):
        open_events(path, helicity="L", **OPEN)
    with pytest.raises(OptionError, match="sqrt_s: must be > 0 GeV; got -1"):
        open_events(path, sqrt_s=-1.0, **OPEN)
