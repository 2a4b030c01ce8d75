from __future__ import annotations

from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
MODULES = sorted((ROOT / "toprecon").rglob("*.py"))


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(ROOT)))
def test_a_module_has_at_most_five_hundred_lines(path):
    assert len(path.read_text(encoding="utf-8").splitlines()) <= 500


def test_the_package_was_found():
    assert len(MODULES) > 100


def test_no_folder_is_a_drawer_for_everything():
    names = {path.name for path in (ROOT / "toprecon").rglob("*") if path.is_dir()}
    names |= {path.stem for path in MODULES}
    assert not names & {"utils", "helpers", "common", "misc", "tools", "lib", "core"}


@pytest.mark.parametrize(
    "package",
    sorted(p.parent for p in MODULES if p.name == "__init__.py"),
    ids=lambda p: p.name,
)
def test_no_module_is_named_like_something_its_package_exports(package):
    """The exported name would hide the module."""
    tree = (package / "__init__.py").read_text(encoding="utf-8")
    exported = tree.partition("__all__")[2]
    modules = {path.stem for path in package.glob("*.py")} - {"__init__", "__main__"}
    assert not [name for name in modules if f'"{name}"' in exported]
