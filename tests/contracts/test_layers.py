from __future__ import annotations

import subprocess
import sys
import tomllib
from pathlib import Path

from tests.require import require

ROOT = Path(__file__).parents[2]
CONTRACTS = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))[
    "tool"
]["importlinter"]["contracts"]
STEPS = (
    "io | generation | selection | pairing | boosted | truth | asymmetry | migration"
)


def test_the_import_contracts_are_kept():
    require("importlinter")
    code = "from importlinter.cli import lint_imports_command as c; c()"
    done = subprocess.run(
        [sys.executable, "-c", code, "--no-cache"],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr
    assert f"{len(CONTRACTS)} kept, 0 broken" in done.stdout


def test_steps_stand_in_one_layer_and_may_not_import_each_other():
    (layers,) = [c["layers"] for c in CONTRACTS if c["type"] == "layers"]
    assert STEPS in layers
    assert not [layer for layer in layers if "(" in layer]


def test_every_room_below_the_edges_is_named_in_the_other_contracts():
    rooms = {
        path.name if path.is_dir() else path.stem
        for path in (ROOT / "toprecon").iterdir()
        if path.suffix == ".py" or (path / "__init__.py").is_file()
    } - {"__init__", "__main__", "cli", "widgets"}
    edges, widgets = [c for c in CONTRACTS if c["type"] == "forbidden"]
    below = {f"toprecon.{room}" for room in rooms}
    # the edges show figures and study, and may raise errors and show options
    allowed = {
        f"toprecon.{r}" for r in ("study", "figures", "errors", "options", "constants")
    }
    assert set(edges["forbidden_modules"]) == below - allowed
    assert set(widgets["source_modules"]) == below
