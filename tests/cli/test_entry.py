"""The command as somebody at a terminal sees it."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from toprecon.cli import main
from toprecon.study import StudyPlan, read_hand_off

LAYOUT = str(Path(__file__).parents[1] / "io" / "layouts" / "showered.toml")


@pytest.fixture
def study_file(event_data):
    return str(event_data / "showered" / "lepjets_500_LR.root")


def test_study_prints_a_table_and_writes_the_hand_off(study_file, tmp_path, capsys):
    folder = tmp_path / "out"
    code = main(["study", study_file, "--layout", LAYOUT, "--out", str(folder)])
    out, err = capsys.readouterr()
    assert code == 0
    assert "generated, selected" in out
    assert "caution: simulated events; statistical errors only" in out
    assert max(len(line) for line in out.splitlines()) <= 92
    assert str(folder) in err
    assert read_hand_off(folder).migration.counts.sum() > 10_000


def test_json_is_alone_on_the_output_and_agrees_with_the_hand_off(
    study_file, tmp_path, capsys
):
    folder = tmp_path / "out"
    arguments = ["study", study_file, "--layout", LAYOUT, "--json", "--out"]
    assert main([*arguments, str(folder)]) == 0
    data = json.loads(capsys.readouterr().out)
    assert data == json.loads((folder / "result.json").read_text())
    assert data["by_helicity"]["LR"]["afb"]["shift"]["value"] < -0.05


def test_settings_of_the_command_line_change_the_plan(study_file, tmp_path, capsys):
    plan = StudyPlan().with_cut("pairing.chi2", high=5).save(tmp_path / "plan.toml")
    arguments = ["study", study_file, "--layout", LAYOUT, "--plan", str(plan)]
    assert main([*arguments, "--set", "cuts.0.high=2.5", "--json"]) == 0
    steps = json.loads(capsys.readouterr().out)["beams"]["cut_flow"]
    assert steps[-1]["step"] == "pairing.chi2 < 2.5"


def test_several_workers_give_the_same_numbers(study_file, tmp_path, capsys):
    arguments = ["study", study_file, "--layout", LAYOUT, "--json"]
    assert main(arguments) == 0
    one = capsys.readouterr().out
    assert main([*arguments, "--workers", "2"]) == 0
    assert capsys.readouterr().out == one


def test_plan_prints_a_plan_that_can_be_read(capsys):
    assert main(["plan"]) == 0
    assert StudyPlan.from_toml(capsys.readouterr().out) == StudyPlan()


@pytest.mark.parametrize(
    ("arguments", "sentence"),
    [
        (["none.root"], "none.root"),
        (["FILE", "--set", "pairing.cpa=5"], "pairing.cpa: unknown option; did you"),
        (["FILE", "--set", "oops"], "--set: SECTION.KEY=VALUE is required; got 'oops'"),
        (["FILE", "--plan", "none.toml"], "none.toml: a study plan (TOML) is required"),
        (["FILE", "--workers", "0"], "--workers: must be >= 1; got 0"),
        (
            [
                "FILE",
                "--set",
                "selection.btag_low=0.9",
                "--set",
                "selection.n_leptons=7",
            ],
            "the step '7 leptons' leaves none of 15000",
        ),
        (["NOT_ROOT"], "not_root.root"),
        (["EMPTY"], "at least one event is required"),
    ],
)
def test_bad_input_is_one_sentence_and_writes_nothing(
    arguments, sentence, study_file, tmp_path, capsys, monkeypatch
):
    monkeypatch.chdir(tmp_path)
    import numpy as np
    import uproot

    not_root = tmp_path / "not_root.root"
    not_root.write_text("this is not a ROOT file")
    empty = tmp_path / "empty.root"
    with uproot.open(study_file) as source, uproot.recreate(empty) as file:
        tree = source["events"]
        types = {}
        for name in tree.keys():  # noqa: SIM118 (a tree is no dict)
            jagged = tree[name].array(entry_stop=1).ndim > 1
            kind = np.dtype(
                tree[name].interpretation.numpy_dtype if not jagged else "f4"
            )
            types[name] = "var * float32" if jagged else kind
        file.mktree("events", types)
    names = {"FILE": study_file, "NOT_ROOT": str(not_root), "EMPTY": str(empty)}
    words = [names.get(word, word) for word in arguments]
    out = tmp_path / "out"
    assert main(["study", *words, "--layout", LAYOUT, "--out", str(out)]) == 2
    captured = capsys.readouterr()
    assert sentence in captured.err
    assert captured.err.strip().count("\n") == 0
    assert captured.out == ""
    assert not out.exists()
    assert not [p for p in tmp_path.iterdir() if p.name.endswith(".part")]


def test_hand_off_is_not_overwritten_unless_asked(study_file, tmp_path, capsys):
    arguments = ["study", study_file, "--layout", LAYOUT, "--out", str(tmp_path / "o")]
    assert main(arguments) == 0
    assert main(arguments) == 2
    assert "a hand-off is there already" in capsys.readouterr().err
    assert main([*arguments, "--replace"]) == 0


def test_foreign_folder_is_never_replaced(study_file, tmp_path, capsys):
    (tmp_path / "mine.txt").write_text("precious")
    arguments = ["study", study_file, "--layout", LAYOUT, "--out", str(tmp_path)]
    assert main([*arguments, "--replace"]) == 2
    assert "is no hand-off folder" in capsys.readouterr().err
    assert (tmp_path / "mine.txt").read_text() == "precious"


def test_lab_outside_a_clone_asks_for_a_folder(tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    assert main(["lab"]) == 2
    assert "run 'toprecon lab FOLDER'" in capsys.readouterr().err


def test_lab_refuses_a_folder_that_does_not_exist(tmp_path, capsys):
    assert main(["lab", str(tmp_path / "none")]) == 2
    assert "lab: a folder is required" in capsys.readouterr().err
