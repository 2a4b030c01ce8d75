"""Committed notebooks are clean and short, and run from top to bottom."""

from __future__ import annotations

import ast
import json
import os
import shutil
from pathlib import Path

import nbformat
import pytest

from tests.require import require

ROOT = Path(__file__).parents[2]
NOTEBOOKS = sorted((ROOT / "notebooks").glob("*.ipynb"))
each = pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda path: path.stem)

# What a notebook writes when something went wrong without an exception.
TROUBLE = ("Traceback (most recent call last)", "Error:", "Warning:")


def _read(path):
    notebook = nbformat.read(path, as_version=4)
    nbformat.validate(notebook)
    return notebook


def _code(notebook):
    return [cell for cell in notebook.cells if cell.cell_type == "code"]


def test_there_is_a_notebook():
    assert NOTEBOOKS


@each
def test_a_committed_notebook_holds_no_output(path):
    notebook = _read(path)
    assert [c for c in _code(notebook) if c.outputs or c.execution_count] == []
    assert "widgets" not in notebook.metadata
    assert path.stat().st_size < 30_000


@each
def test_a_notebook_is_short(path):
    cells = _code(_read(path))
    assert len(cells) <= 15
    long = [c.source for c in cells if len(c.source.strip().splitlines()) > 8]
    assert long == []


@each
def test_a_notebook_defines_nothing(path):
    tree = ast.parse("\n".join(cell.source for cell in _code(_read(path))))
    kinds = (ast.FunctionDef, ast.AsyncFunctionDef, ast.ClassDef, ast.Lambda)
    assert [type(x).__name__ for x in ast.walk(tree) if isinstance(x, kinds)] == []


@each
def test_a_notebook_says_what_its_numbers_rest_on(path):
    notebook = _read(path)
    words = " ".join(c.source for c in notebook.cells if c.cell_type == "markdown")
    assert "statistical" in words
    assert "errors only" in " ".join(words.split())
    assert notebook.cells[0].cell_type == "markdown"
    assert notebook.cells[0].source.startswith("# ")


def _layout_of_the_repository(folder):
    """Copy what a notebook needs, in the places where it expects it."""
    shutil.copytree(ROOT / "notebooks", folder / "notebooks")
    (folder / "sample_events").symlink_to(ROOT / "sample_events")
    return folder / "notebooks"


def _texts(output):
    """Everything readable in one output of a cell."""
    if output.output_type == "stream":
        yield output.text
    for kind, data in output.get("data", {}).items():
        if kind.startswith("text/"):
            yield data
        elif kind.endswith("json"):
            yield json.dumps(data)


@pytest.mark.notebook
@pytest.mark.timeout(600)
@each
def test_a_notebook_runs_without_error_or_warning(path, tmp_path, monkeypatch):
    require("ipykernel")
    nbclient = require("nbclient")
    monkeypatch.setenv("TOPRECON_STRICT", "1")
    monkeypatch.setenv("MPLBACKEND", "agg")
    # some kernels warn on their own start, before any cell
    monkeypatch.setenv("PYTHONWARNINGS", os.environ.get("PYTHONWARNINGS", "default"))
    folder = _layout_of_the_repository(tmp_path)
    notebook = _read(folder / path.name)
    before = {p: p.stat().st_mtime_ns for p in (ROOT / "sample_events").iterdir()}
    client = nbclient.NotebookClient(
        notebook,
        timeout=300,
        kernel_name="python3",
        resources={"metadata": {"path": str(folder)}},
        store_widget_state=True,
    )
    client.execute()
    found = [
        text
        for cell in _code(notebook)
        for output in cell.outputs
        for text in _texts(output)
        if any(word in text for word in TROUBLE)
    ]
    state = json.dumps(notebook.metadata.get("widgets", {}))
    found += [word for word in TROUBLE if word in state]
    assert found == []
    errors = [o for c in _code(notebook) for o in c.outputs if o.output_type == "error"]
    assert errors == []
    after = {p: p.stat().st_mtime_ns for p in (ROOT / "sample_events").iterdir()}
    assert after == before
