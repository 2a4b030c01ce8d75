"""The command as somebody at a terminal sees it."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest

from tests.require import require
from tests.samples import SAMPLES
from toprecon.cli import main
from toprecon.study import StudyPlan, read_hand_off, reconstruct_source

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


RECIPE = """
[[samples]]
name = "pairs"
events = 30
"""


def test_generate_makes_samples_and_refuses_to_replace_others(tmp_path, capsys):
    recipe = tmp_path / "recipe.toml"
    recipe.write_text(RECIPE)
    folder = tmp_path / "events"
    arguments = ["generate", str(recipe), "--out", str(folder), "--part-size", "20"]
    assert main(arguments) == 0
    out, err = capsys.readouterr()
    assert out.startswith(f"{folder / 'pairs.root'}  30 of 30 events  content ")
    assert "pairs: 30 of 30 events" in err
    assert main(arguments) == 0
    assert capsys.readouterr().out == out
    recipe.write_text(RECIPE + "seed = 5\n")
    assert main(arguments) == 2
    assert "allow replacing it (replace=True, --replace)" in capsys.readouterr().err
    assert main([*arguments, "--replace"]) == 0
    assert capsys.readouterr().out != out


def test_generate_says_what_is_wrong_with_a_recipe(tmp_path, capsys):
    recipe = tmp_path / "recipe.toml"
    recipe.write_text(RECIPE.replace("events", "evnts"))
    assert main(["generate", str(recipe), "--out", str(tmp_path / "x")]) == 2
    assert "samples.0.evnts: unknown option" in capsys.readouterr().err
    assert not (tmp_path / "x").exists()


def test_only_its_own_line_is_on_the_output_of_a_generation(tmp_path):
    """Libraries that print by themselves must not break what a program reads."""
    require("pythia8mc")
    recipe = tmp_path / "recipe.toml"
    recipe.write_text(RECIPE + 'options = { simulation = "shower" }\n')
    code = (
        "from toprecon.cli import main\n"
        f"main(['generate', {str(recipe)!r}, '--out', {str(tmp_path / 'out')!r}])"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True
    )
    assert done.stdout.count("\n") == 1
    assert done.stdout.startswith(str(tmp_path / "out" / "pairs.root"))


def test_lab_without_jupyterlab_says_how_to_get_it(tmp_path, monkeypatch, capsys):
    monkeypatch.setitem(sys.modules, "jupyterlab", None)
    assert main(["lab", str(tmp_path)]) == 2
    assert "run pip install -e '.[lab]' in the clone" in capsys.readouterr().err


def test_calibrate_writes_a_plan_that_study_takes(tmp_path, capsys):
    files = [str(SAMPLES / f"lepjets_550_{h}.root") for h in ("LR", "RL")]
    plan = tmp_path / "plan.toml"
    assert main(["calibrate", *files, "--out", str(plan)]) == 0
    assert "right before -> after" in capsys.readouterr().out
    assert main(["study", *files, "--plan", str(plan)]) == 0
    assert "caution" in capsys.readouterr().out
    assert main(["calibrate", *files, "--out", str(plan)]) == 2
    assert "a new file is required" in capsys.readouterr().err


def test_variations_are_printed_and_in_the_json(capsys):
    words = ["study", str(SAMPLES / "lepjets_550_LR.root"), "--variations"]
    assert main(words) == 0
    assert "jet energy +1 %" in capsys.readouterr().out
    assert main([*words, "--json"]) == 0
    data = json.loads(capsys.readouterr().out)
    assert data["variations"]["b tags lost 2 %"]["efficiency"]["value"] < 0
    assert "both helicities" in data["helicities"]["missing"]


def test_variations_go_into_the_hand_off(tmp_path, capsys):
    out = tmp_path / "out"
    words = ["study", str(SAMPLES / "lepjets_550_LR.root"), "--out", str(out)]
    assert main([*words, "--variations", "--json"]) == 0
    printed = json.loads(capsys.readouterr().out)["variations"]
    assert json.loads((out / "variations.json").read_text()) == printed
    assert main([*words, "--replace"]) == 0
    assert not (out / "variations.json").exists()


def test_a_saved_table_cannot_be_varied_and_nothing_is_written(tmp_path, capsys):
    sample = SAMPLES / "lepjets_550_LR.root"
    table = reconstruct_source(str(sample), StudyPlan())
    path = table.save(tmp_path / "table.parquet")
    out = tmp_path / "out"
    assert main(["study", str(path), "--variations", "--out", str(out)]) == 2
    captured = capsys.readouterr()
    assert "events are required for variations, which reconstruct them" in captured.err
    assert captured.out == ""
    assert not out.exists()
    assert main(["study", str(path)]) == 0
