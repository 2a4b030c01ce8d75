"""The hand-off folder: complete or absent, and the same when read back."""

from __future__ import annotations

import dataclasses
import json
import subprocess
import sys

import pytest

from tests.study.numbers import leaves
from toprecon.errors import InputError, StudyError
from toprecon.study import (
    CAUTIONS,
    StudyPlan,
    UnfoldingOptions,
    handoff,
    read_hand_off,
    result_text,
    run_study,
)

FILES = {
    "README.txt",
    "closure.json",
    "hepdata",
    "migration.json",
    "migration.npz",
    "migration.root",
    "migration_LR.json",
    "migration_LR.npz",
    "migration_LR.root",
    "migration_RL.json",
    "migration_RL.npz",
    "migration_RL.root",
    "plan.toml",
    "provenance.json",
    "result.json",
}
WRITERS = [
    "write_root",
    "write_npz",
    "write_histogram_json",
    "write_hepdata",
    "_write_json",
    "_readme",
]


@pytest.fixture(scope="module")
def result(study_files, study_plan):
    plan = study_plan.with_settings({"migration.replicas": 4, "study.name": "Prüfung"})
    return run_study(study_files, plan)


def test_the_folder_is_complete_and_reads_back_bit_for_bit(result, tmp_path):
    folder = result.hand_off(tmp_path / "deep" / "out")
    assert {p.name for p in folder.iterdir()} == FILES
    assert [p.name for p in folder.parent.iterdir()] == ["out"]
    back = read_hand_off(folder)
    assert back.migration.equals(result.migration)
    assert set(back.by_helicity) == {"LR", "RL"}
    for name, matrix in back.by_helicity.items():
        assert matrix.equals(result.by_helicity[name].migration)
    assert back.plan == result.plan
    assert back.provenance["plan_hash"] == result.plan.hash
    assert back.provenance["inputs"] == result.inputs


def test_every_form_of_the_matrix_is_the_same(result, tmp_path):
    from toprecon.migration import read_histogram_json, read_root

    folder = result.hand_off(tmp_path / "out")
    assert read_root(folder / "migration.root").equals(result.migration)
    # the open histogram serialisation holds histograms, no bootstrap replicas
    matrix = result.migration
    plain = dataclasses.replace(matrix, replicas=matrix.replicas[:0])
    assert read_histogram_json(folder / "migration.json").equals(plain)


def test_the_numbers_are_those_of_the_result(result, tmp_path):
    folder = result.hand_off(tmp_path / "out")
    stored = json.loads((folder / "result.json").read_text(encoding="utf-8"))
    assert dict(leaves(stored)) == dict(leaves(result.to_mapping()))


def test_the_text_says_what_it_rests_on(result, tmp_path):
    folder = result.hand_off(tmp_path / "out")
    text = (folder / "README.txt").read_text(encoding="utf-8")
    provenance = json.loads((folder / "provenance.json").read_text(encoding="utf-8"))
    for caution in CAUTIONS:
        assert caution in " ".join(text.split())
        assert caution in provenance["cautions"]
    assert "500 fb^-1" in text
    assert provenance["program"] == "toprecon"
    assert {s["name"] for s in provenance["samples"]} == {"pairs_LR", "pairs_RL"}


def test_the_plan_of_a_hand_off_gives_the_same_numbers(result, study_files, tmp_path):
    folder = result.hand_off(tmp_path / "out")
    again = run_study(study_files, StudyPlan.load(folder / "plan.toml"))
    assert again.to_mapping() == result.to_mapping()


@pytest.mark.parametrize("writer", WRITERS)
def test_an_error_while_writing_leaves_nothing(writer, result, tmp_path, monkeypatch):
    def fail(*_):
        message = "disk full"
        raise OSError(message)

    monkeypatch.setattr(handoff, writer, fail)
    with pytest.raises(OSError, match="disk full"):
        result.hand_off(tmp_path / "out")
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("writer", ["write_npz", "_write_json"])
def test_an_error_while_replacing_leaves_the_old_folder(
    writer, result, tmp_path, monkeypatch
):
    folder = result.hand_off(tmp_path / "out")
    before = {p.name: p.read_bytes() for p in folder.iterdir() if p.is_file()}

    def fail(*_):
        message = "disk full"
        raise OSError(message)

    monkeypatch.setattr(handoff, writer, fail)
    with pytest.raises(OSError, match="disk full"):
        result.hand_off(folder, replace=True)
    after = {p.name: p.read_bytes() for p in folder.iterdir() if p.is_file()}
    assert after == before
    assert list(tmp_path.iterdir()) == [folder]


CRASH = """
import os, sys
from toprecon.study import StudyPlan, handoff, run_study
plan = StudyPlan.load(sys.argv[2])
result = run_study(sys.argv[3:], plan)
handoff.write_hepdata = lambda *a: os._exit(9)  # as if killed
result.hand_off(sys.argv[1], replace=True)
"""


def test_a_kill_while_writing_leaves_no_folder_under_the_name(
    result, study_files, tmp_path
):
    plan = result.plan.save(tmp_path / "plan.toml")
    target = tmp_path / "out"
    command = [sys.executable, "-c", CRASH, str(target), str(plan), *study_files]
    assert subprocess.run(command, check=False).returncode == 9
    assert not target.exists()
    rest = [p.name for p in tmp_path.iterdir() if p.name.endswith(".part")]
    assert len(rest) == 1
    assert rest[0].startswith(".out.")
    # the next run is not disturbed by what was left
    folder = result.hand_off(target)
    assert read_hand_off(folder).migration.equals(result.migration)


def test_an_existing_hand_off_is_replaced_only_if_asked(result, tmp_path):
    folder = result.hand_off(tmp_path / "out")
    with pytest.raises(
        StudyError, match=r"a hand-off is there already; choose another name or allow"
    ):
        result.hand_off(folder)
    (folder / "stale.txt").write_text("old")
    result.hand_off(folder, replace=True)
    assert {p.name for p in folder.iterdir()} == FILES
    assert list(tmp_path.iterdir()) == [folder]


@pytest.mark.parametrize("replace", [True, False])
def test_a_foreign_folder_or_file_is_never_touched(replace, result, tmp_path):
    mine = tmp_path / "mine"
    mine.mkdir()
    (mine / "precious").write_text("x")
    file = tmp_path / "file"
    file.write_text("x")
    for target in (mine, file):
        with pytest.raises(StudyError, match="this exists and is no hand-off folder"):
            result.hand_off(target, replace=replace)
    assert (mine / "precious").read_text() == "x"
    assert file.read_text() == "x"


def test_an_empty_folder_may_be_filled(result, tmp_path):
    (tmp_path / "out").mkdir()
    folder = result.hand_off(tmp_path / "out")
    assert read_hand_off(folder).migration.equals(result.migration)


def test_a_folder_that_is_no_hand_off_is_refused(tmp_path):
    with pytest.raises(InputError, match=r"a hand-off folder is required, but proven"):
        read_hand_off(tmp_path)


@pytest.mark.parametrize("name", ["migration.npz", "migration_LR.npz", "plan.toml"])
def test_an_incomplete_hand_off_is_refused(name, result, tmp_path):
    folder = result.hand_off(tmp_path / "out")
    (folder / name).unlink()
    with pytest.raises(InputError, match=name.replace(".", r"\.")):
        read_hand_off(folder)


def test_the_result_in_words_names_every_cause(result):
    text = result_text(result)
    for words in ("generated, all signal", "shift of A_FB by cause", "beams LR", "RL"):
        assert words in text
    assert max(len(line) for line in text.splitlines()) <= 92
    assert "Prüfung" in text


def test_the_folder_says_how_well_every_method_closes(result, tmp_path):
    folder = result.hand_off(tmp_path / "out")
    closures = json.loads((folder / "closure.json").read_text(encoding="utf-8"))
    assert set(closures) == {"plan", *result.by_helicity}
    for name, methods in closures.items():
        beams = result.beams if name == "plan" else result.by_helicity[name]
        assert set(methods) == {"inversion", "tikhonov", "bayes"}
        found = beams.closure(UnfoldingOptions(method="bayes"))
        assert methods["bayes"]["residual"] == found.residual.tolist()
        assert methods["bayes"]["afb_residual"] == found.asymmetry_residual.to_mapping()
        half_b = beams.migration.without(beams.half_a)
        assert methods["bayes"]["generated"] == half_b.generated.tolist()


def test_a_closure_that_cannot_be_made_says_why(study_files, study_plan, tmp_path):
    plan = study_plan.with_settings({"migration.edges": [-1.0, -0.9999999, 0.0, 1.0]})
    folder = run_study(study_files, plan).hand_off(tmp_path / "out")
    closures = json.loads((folder / "closure.json").read_text(encoding="utf-8"))
    assert (
        "selected events in every generated bin"
        in (closures["plan"]["inversion"]["missing"])
    )
