from __future__ import annotations

import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
VISIBLE = {
    "DEVELOPERS.md",
    "README.md",
    "notebooks",
    "pyproject.toml",
    "sample_events",
    "tests",
    "toprecon",
}


def _tracked():
    done = subprocess.run(
        ["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, text=True, check=False
    )
    if done.returncode:
        pytest.fail(f"a git checkout is required; {done.stderr.strip()}")
    return [name for name in done.stdout.split("\0") if name]


def test_the_visible_top_level_is_exactly_what_the_developers_page_says():
    top = {name.partition("/")[0] for name in _tracked()}
    assert {name for name in top if not name.startswith(".")} == VISIBLE


def test_no_tracked_file_is_large_except_samples():
    sizes = {
        name: (ROOT / name).stat().st_size
        for name in _tracked()
        if (ROOT / name).is_file() and not name.startswith("sample_events/")
    }
    assert not {name: size for name, size in sizes.items() if size > 400_000}


def test_the_tests_mirror_the_rooms():
    rooms = {
        path.name
        for path in (ROOT / "toprecon").iterdir()
        if (path / "__init__.py").is_file()
    }
    folders = {
        path.name for path in (ROOT / "tests").iterdir() if any(path.glob("test_*.py"))
    }
    extra = {"benchmarks", "browser", "contracts", "notebooks"}
    assert rooms <= folders
    assert folders - rooms <= extra
