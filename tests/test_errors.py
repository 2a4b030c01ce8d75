from __future__ import annotations

import inspect

import pytest

from toprecon import errors
from toprecon.errors import nearest

TREE = {
    "OptionError": ValueError,
    "MissingFieldError": LookupError,
    "InputError": OSError,
    "UnknownFormatError": errors.InputError,
    "MissingPackageError": ImportError,
    "StudyError": RuntimeError,
}


@pytest.mark.parametrize(("name", "base"), TREE.items())
def test_every_exception_is_ours_and_a_built_in(name, base):
    kind = getattr(errors, name)
    assert issubclass(kind, errors.TopreconError)
    assert issubclass(kind, base)
    assert str(kind("one sentence")) == "one sentence"


def test_the_tree_is_drawn_in_full():
    classes = [n for n, c in vars(errors).items() if inspect.isclass(c)]
    for name in classes:
        if name != "Iterable":
            assert name in errors.__doc__


def test_warnings_can_be_silenced_together():
    for name, kind in vars(errors).items():
        if name.endswith("Warning"):
            assert issubclass(kind, errors.TopreconWarning)


def test_a_close_name_is_offered():
    assert nearest("chi", ["chi2", "gap"]) == "; did you mean 'chi2'?"


def test_without_a_close_name_all_are_listed():
    assert nearest("zzz", ["b", "a", "b"]) == "; known: a, b"


def test_nothing_known_gives_no_hint():
    assert nearest("zzz", []) == ""
