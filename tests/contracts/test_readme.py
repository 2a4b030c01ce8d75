"""What the README says can be done as it says."""

from __future__ import annotations

import re
import shlex
import shutil
from pathlib import Path

import pytest

from toprecon.cli import main
from toprecon.study import read_hand_off

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text(encoding="utf-8")


def _blocks(language):
    return re.findall(rf"^```{language}\n(.*?)^```", README, re.DOTALL | re.MULTILINE)


@pytest.fixture
def clone(tmp_path, monkeypatch):
    """A folder that looks like a clone, and is the working directory."""
    shutil.copytree(ROOT / "sample_events", tmp_path / "sample_events")
    monkeypatch.chdir(tmp_path)
    return tmp_path


def test_there_are_two_set_up_commands_of_one_line_each():
    setup = [block for block in _blocks("sh") if "venv" in block]
    assert len(setup) == 2
    for block in setup:
        assert len(block.strip().splitlines()) == 1
        assert block.startswith("python3 -m venv .venv && .venv/bin/pip install -e '.[")
    assert README.count("pip install") == 2


def test_the_extras_of_the_set_up_commands_exist():
    import tomllib

    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    extras = re.findall(r"install -e '\.\[(\w+)\]'", README)
    assert extras == ["lab", "test"]
    assert set(extras) <= set(project["project"]["optional-dependencies"])


def test_the_python_example_runs(clone, capsys):
    (example,) = _blocks("python")
    exec(compile(example, "README.md", "exec"), {})
    out = capsys.readouterr().out
    assert out.splitlines()[0].startswith("LR ")
    assert read_hand_off(clone / "my_study").plan.beams.luminosity == 500


def test_the_commands_run(clone, capsys):
    lines = [
        line
        for block in _blocks("sh")
        for line in block.splitlines()
        if line.startswith("toprecon ")
    ]
    assert [line.split()[1] for line in lines] == [
        "describe",
        "plan",
        "calibrate",
        "study",
        "generate",
    ]
    describe, plan, calibrate, study, generate = lines
    assert main(shlex.split(describe)[1:]) == 0
    assert "6000 entries" in capsys.readouterr().out
    command, _, target = plan.partition(" > ")
    assert main(shlex.split(command)[1:]) == 0
    Path(target).write_text(capsys.readouterr().out, encoding="utf-8")
    assert main(shlex.split(calibrate)[1:]) == 0
    assert "right before -> after" in capsys.readouterr().out
    assert main(shlex.split(study)[1:]) == 0
    assert "generated, selected" in capsys.readouterr().out
    assert read_hand_off(clone / "my_study").plan.beams.luminosity == 500
    words = shlex.split(generate)[1:]
    small = '[[samples]]\nname = "a"\nevents = 5\n'
    (clone / "sample_events" / "recipe.toml").write_text(small, encoding="utf-8")
    assert main(words) == 0
    assert (clone / "my_events" / "a.root").is_file()


def test_every_sample_file_is_explained():
    rows = " ".join(re.findall(r"^\|.*\|$", README, re.MULTILINE))
    for path in (ROOT / "sample_events").glob("*.root"):
        stem, _, last = path.stem.rpartition("_")
        assert f"`{path.stem}`" in rows or (
            f"`{stem}_" in rows and f"`_{last}`" in rows
        )


def test_the_options_it_names_exist(capsys):
    with pytest.raises(SystemExit):
        main(["study", "--help"])
    text = capsys.readouterr().out
    for option in re.findall(r"`(--[a-z]+)`", README):
        assert option in text


@pytest.mark.parametrize("name", ["README.md", "DEVELOPERS.md"])
def test_the_page_names_only_files_that_exist(name):
    text = (ROOT / name).read_text(encoding="utf-8")
    paths = re.findall(
        r"`((?:toprecon|tests|study|sample_events|notebooks|\.ci)/[\w./]*)`", text
    )
    assert paths
    for path in paths:
        assert (ROOT / path).exists() or (ROOT / "toprecon" / path).exists(), path
