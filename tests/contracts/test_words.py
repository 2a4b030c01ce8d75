"""Tracked files are the same on every machine and speak of the subject only."""

from __future__ import annotations

import re
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]

MACHINE_PATH = re.compile(r"(?<![\w.~$}\])*])/(?:work|root|home|opt|Users|tmp)/\w")
REGISTRIES = re.compile(
    r"(?:pypi|pythonhosted|anaconda|npmjs|conda-forge)\.(?:org|com|io)"
)
OTHER_SUBJECTS = re.compile(
    r"transcript|seed doc|session of work|earlier session|\bhelper session"
    r"|language model|\bissue \d+|shared/(?!data)",
    re.IGNORECASE,
)


def _tracked():
    done = subprocess.run(
        ["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, text=True, check=True
    )
    return [ROOT / name for name in done.stdout.split("\0") if name]


def _texts():
    for path in _tracked():
        if path == Path(__file__) or not path.is_file():
            continue
        try:
            yield path, path.read_text(encoding="utf-8")
        except UnicodeDecodeError:
            continue  # a binary file


@pytest.mark.parametrize(
    "pattern",
    [MACHINE_PATH, REGISTRIES, OTHER_SUBJECTS],
    ids=["paths of a machine", "package registries", "other subjects"],
)
def test_no_tracked_text_file_mentions(pattern):
    found = [
        f"{path.relative_to(ROOT)}:{number}: {line.strip()[:100]}"
        for path, text in _texts()
        for number, line in enumerate(text.splitlines(), 1)
        if pattern.search(line)
    ]
    assert found == []


@pytest.mark.parametrize(
    ("pattern", "text"),
    [
        (MACHINE_PATH, '"/' + 'home/someone/events.root"'),
        (MACHINE_PATH, "see /" + "opt/thing/bin"),
        (REGISTRIES, "https://" + "pypi" + ".org/simple"),
        (OTHER_SUBJECTS, "as the seed " + "document says"),
    ],
)
def test_the_patterns_find_what_they_should(pattern, text):
    assert pattern.search(text)


@pytest.mark.parametrize("text", ["a/work/b", "$HOME/work/x", "tests/tmp/x"])
def test_relative_paths_are_fine(text):
    assert not MACHINE_PATH.search(text)
