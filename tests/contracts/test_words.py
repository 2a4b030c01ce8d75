"""Tracked files are the same on every machine."""

from __future__ import annotations

import re
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]

MACHINE_PATH = re.compile(r"(?<![\w.~$}\])*])/(?:root|home|opt|Users|tmp)/\w")


def _texts():
    done = subprocess.run(
        ["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, text=True, check=True
    )
    for name in filter(None, done.stdout.split("\0")):
        try:
            yield name, (ROOT / name).read_text(encoding="utf-8")
        except (UnicodeDecodeError, FileNotFoundError):
            continue  # a binary file, or one that is being removed


def test_no_tracked_file_names_a_path_of_a_machine():
    found = [
        f"{name}:{number}: {line.strip()[:100]}"
        for name, text in _texts()
        for number, line in enumerate(text.splitlines(), 1)
        if MACHINE_PATH.search(line)
    ]
    assert found == []


@pytest.mark.parametrize("start", ["home", "opt", "tmp"])
def test_the_pattern_finds_a_path(start):
    assert MACHINE_PATH.search(f'open("/{start}/someone/events.root")')


@pytest.mark.parametrize("text", ["a/home/b", "$HOME/home/x", "tests/tmp/x"])
def test_relative_paths_are_fine(text):
    assert not MACHINE_PATH.search(text)
