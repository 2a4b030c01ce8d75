"""Public names are a promise: adding or removing one shows up here.

``public_names.txt`` holds one line per room: ``room: name name ...``.
"""

from __future__ import annotations

import importlib
import pkgutil
import types
from pathlib import Path

import pytest

import toprecon

WRITTEN = {
    room: set(names.split())
    for room, _, names in (
        line.partition(":")
        for line in Path(__file__)
        .with_name("public_names.txt")
        .read_text(encoding="utf-8")
        .splitlines()
        if line
    )
}
ROOMS = sorted(
    f"toprecon.{module.name}"
    for module in pkgutil.iter_modules(toprecon.__path__)
    if module.name != "__main__"
)
PACKAGES = [
    room for room in ROOMS if hasattr(importlib.import_module(room), "__path__")
]


def test_the_package_shows_exactly_its_public_names():
    assert set(dir(toprecon)) == WRITTEN["toprecon"]
    for name in dir(toprecon):
        assert getattr(toprecon, name) is not None


def test_unknown_name_is_an_attribute_error():
    with pytest.raises(AttributeError, match="'toprecon' has no attribute 'desk'"):
        _ = toprecon.desk


def test_every_room_is_written_out():
    assert set(WRITTEN) == {"toprecon", *PACKAGES}


@pytest.mark.parametrize("room", PACKAGES)
def test_a_room_shows_exactly_its_public_names(room):
    module = importlib.import_module(room)
    shown = {
        name
        for name, value in vars(module).items()
        if not name.startswith("_")
        and not isinstance(value, types.ModuleType)
        and name not in {"annotations", "TYPE_CHECKING", "Any"}
    }
    assert shown == WRITTEN[room], "add to or remove from public_names.txt"
    assert set(module.__all__) == WRITTEN[room]


@pytest.mark.parametrize("room", PACKAGES)
def test_the_list_of_a_room_names_every_thing_once(room):
    names = importlib.import_module(room).__all__
    assert len(set(names)) == len(names)


@pytest.mark.parametrize("room", PACKAGES)
def test_everything_public_is_documented(room):
    module = importlib.import_module(room)
    assert module.__doc__
    bare = [
        name
        for name in module.__all__
        if isinstance(getattr(module, name), (type, types.FunctionType))
        and not (getattr(module, name).__doc__ or "").strip()
    ]
    assert bare == []
