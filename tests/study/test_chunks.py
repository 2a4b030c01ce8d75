"""Finished parts: used again only if they are whole and of the same plan and chunk."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from tests.study.numbers import numbers_of
from toprecon.errors import InputError, StudyError
from toprecon.events import EventTable
from toprecon.io import ChunkRef
from toprecon.study import (
    check_references,
    chunks,
    open_events,
    part_path,
    reconstruct_chunk,
    reconstruct_source,
    run_study,
)

SIZE = 400  # 3 chunks of the first file, 2 of the second


@pytest.fixture
def counted(monkeypatch):
    """Count the chunks that are really reconstructed."""
    made = []
    original = chunks.reconstruct

    def reconstruct(events, plan):
        made.append(len(events))
        return original(events, plan)

    monkeypatch.setattr(chunks, "reconstruct", reconstruct)
    return made


@pytest.fixture
def finished(study_files, study_plan, tmp_path):
    """A folder with all parts of a study, and its result."""
    folder = tmp_path / "parts"
    result = run_study(study_files, study_plan, chunk_size=SIZE, parts=folder)
    return folder, result


def _again(study_files, plan, folder):
    return run_study(study_files, plan, chunk_size=SIZE, parts=folder)


def test_parts_are_named_by_plan_and_chunk(finished, study_files, study_plan):
    folder, _ = finished
    refs = open_events(study_files).references(SIZE)
    expected = {part_path(ref, study_plan, folder) for ref in refs}
    assert set(folder.iterdir()) == expected
    assert len(expected) == 5
    assert all(p.name.startswith(study_plan.reconstruct_hash[:16]) for p in expected)


def test_a_second_run_makes_nothing_again(finished, counted, study_files, study_plan):
    folder, result = finished
    before = {p: p.stat().st_mtime_ns for p in folder.iterdir()}
    assert _again(study_files, study_plan, folder).to_mapping() == result.to_mapping()
    assert counted == []
    assert {p: p.stat().st_mtime_ns for p in folder.iterdir()} == before


def test_parts_do_not_change_the_numbers(finished, study_files, study_plan):
    _, result = finished
    direct = run_study(study_files, study_plan, chunk_size=SIZE)
    assert direct.to_mapping() == result.to_mapping()


def test_a_deleted_part_is_made_again(finished, counted, study_files, study_plan):
    folder, result = finished
    sorted(folder.iterdir())[2].unlink()
    assert _again(study_files, study_plan, folder).to_mapping() == result.to_mapping()
    assert len(counted) == 1
    assert len(list(folder.iterdir())) == 5


@pytest.mark.parametrize(
    "damage", ["cut", "empty", "text", "a bit", "other part", "no rest"]
)
def test_a_damaged_part_is_made_again(
    damage, finished, counted, study_files, study_plan
):
    folder, result = finished
    first, second, *_ = sorted(folder.iterdir())
    data = first.read_bytes()
    if damage == "cut":
        first.write_bytes(data[: len(data) // 2])
    elif damage == "empty":
        first.write_bytes(b"")
    elif damage == "text":
        first.write_text("nothing")
    elif damage == "a bit":
        half = len(data) // 2
        first.write_bytes(data[:half] + bytes([data[half] ^ 1]) + data[half + 1 :])
    elif damage == "other part":
        first.write_bytes(second.read_bytes())
    else:
        table = EventTable.load(first)
        del table.provenance["part"]
        table.save(first)
    assert _again(study_files, study_plan, folder).to_mapping() == result.to_mapping()
    assert len(counted) == 1
    assert EventTable.load(first).provenance["part"]


def test_a_run_that_was_killed_goes_on(finished, counted, study_files, study_plan):
    folder, result = finished
    for path in sorted(folder.iterdir())[1:]:
        path.unlink()
    # what a kill in the middle of writing leaves behind
    (folder / ".half.parquet.123.part").write_bytes(b"PAR1")
    assert _again(study_files, study_plan, folder).to_mapping() == result.to_mapping()
    assert len(counted) == 4


def test_parts_of_another_plan_are_not_used(finished, counted, study_files, study_plan):
    folder, _ = finished
    other = study_plan.with_settings({"pairing.top_mass": "165"})
    with_parts = _again(study_files, other, folder)
    assert len(counted) == 5
    assert len(list(folder.iterdir())) == 10
    assert numbers_of(with_parts) == numbers_of(
        run_study(study_files, other, chunk_size=SIZE)
    )


def test_parts_serve_other_cuts(finished, counted, study_files, study_plan):
    folder, _ = finished
    other = study_plan.with_cut("pairing.chi2", high=5)
    with_parts = _again(study_files, other, folder)
    assert counted == []
    assert with_parts.cut_flow.steps[-1] == "pairing.chi2 < 5"


def test_a_changed_file_makes_other_parts(finished, counted, study_files, study_plan):
    refs = open_events(study_files).references(SIZE)
    changed = dataclasses.replace(refs[0], fingerprint="0" * 64)
    folder, _ = finished
    assert part_path(changed, study_plan, folder) != part_path(
        refs[0], study_plan, folder
    )


def test_a_reference_to_a_changed_file_is_refused(study_files, study_plan):
    source = open_events(study_files)
    (ref, *_) = source.references(SIZE)
    changed = dataclasses.replace(ref, fingerprint="0" * 64)
    with pytest.raises(InputError, match="not a file of this source, or changed"):
        reconstruct_chunk(changed, study_plan, source.description)


def test_the_report_of_a_part_is_kept(finished, study_files, study_plan):
    folder, result = finished
    assert result.report.entries == 1600
    assert _again(study_files, study_plan, folder).report.entries == 1600


def _ref(start, stop, *, tree="events", fingerprint="f", path="a.root"):
    return ChunkRef("s", path, tree, fingerprint, start, stop)


def test_chunks_that_overlap_are_refused():
    with pytest.raises(
        StudyError,
        match=r"a.root: every entry may be used once, but the chunks \[0, 10\) and "
        r"\[9, 20\) overlap; is the same file listed twice\?",
    ):
        check_references([_ref(9, 20), _ref(0, 10)])


def test_the_same_file_under_another_name_overlaps():
    with pytest.raises(StudyError, match=r"b.root: every entry may be used once"):
        check_references([_ref(0, 10), _ref(0, 10, path="b.root")])


def test_a_long_chunk_overlaps_with_any_later_one():
    with pytest.raises(StudyError, match="overlap"):
        check_references([_ref(0, 100), _ref(10, 20), _ref(90, 110)])


@pytest.mark.parametrize(
    "refs",
    [
        [],
        [_ref(0, 10), _ref(10, 20)],
        [_ref(0, 10), _ref(0, 10, tree="other")],
        [_ref(0, 10), _ref(0, 10, fingerprint="g")],
    ],
)
def test_chunks_side_by_side_are_fine(refs):
    check_references(refs)


def test_a_whole_source_gives_the_rows_of_its_chunks(study_files, study_plan):
    source = open_events(study_files)
    table = reconstruct_source(source, study_plan)
    parts = [
        reconstruct_chunk(ref, study_plan, source.description)[0]
        for ref in source.references(SIZE)
    ]
    joined = EventTable.concatenate(parts)
    for name in table:
        assert table[name].tobytes() == joined[name].tobytes(), name
    assert [s.entries for s in joined.samples] == [900, 700]
    weights = [s.sum_of_weights for s in joined.samples]
    # the same weights added in another order
    assert np.allclose(weights, [s.sum_of_weights for s in table.samples], rtol=1e-13)


def test_a_source_without_events_is_refused(study_files, study_plan, monkeypatch):
    source = open_events(study_files)
    monkeypatch.setattr(source, "chunks", lambda: iter(()))
    with pytest.raises(InputError, match="at least one event is required; got none"):
        reconstruct_source(source, study_plan)
