"""Settings: one declaration, one sentence for every mistake."""

from __future__ import annotations

import math
from enum import StrEnum
from typing import Literal

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic import field_validator

from toprecon.errors import OptionError
from toprecon.options import Options, option


class Kind(StrEnum):
    PLAIN = "plain"
    FANCY = "fancy"


class Term(Options):
    width: float = option(10.0, "width", unit="GeV", low=0.1, high=100.0)
    on: bool = option(True, "whether it counts")


class Settings(Options):
    name: str = option("x", "a name")
    count: int = option(3, "a number", low=1, high=9)
    size: float = option(0.5, "a size", above=0.0)
    kind: Kind = option(Kind.PLAIN, "a kind")
    mode: Literal["a", "b"] = option("a", "a mode")
    terms: tuple[Term, ...] = option((), "terms")
    inner: Term = option(None, "one term", factory=Term)
    limit: float | None = option(None, "a limit", unit="rad")

    @field_validator("name")
    @classmethod
    def _short(cls, value):
        if len(value) > 5:
            msg = f"must have at most 5 letters; got {value!r}"
            raise ValueError(msg)
        return value


class Needed(Options):
    value: float = option(..., "no default")


@pytest.mark.parametrize(
    ("settings", "sentence"),
    [
        ({"cuont": 1}, "cuont: unknown option; did you mean 'count'?"),
        ({"count": 0}, "count: must be >= 1; got 0"),
        ({"count": 10}, "count: must be <= 9; got 10"),
        ({"size": 0}, "size: must be > 0; got 0"),
        ({"size": math.nan}, "size: must be a finite number; got nan"),
        ({"size": math.inf}, "size: must be a finite number; got inf"),
        ({"kind": "odd"}, "kind: must be one of 'plain' or 'fancy'; got 'odd'"),
        ({"mode": "c"}, "mode: must be one of 'a' or 'b'; got 'c'"),
        ({"inner": {"width": -3}}, "inner.width: must be >= 0.1 GeV; got -3"),
        ({"inner": {"widht": 1}}, "inner.widht: unknown option; did you mean 'width'?"),
        (
            {"terms": [{}, {"width": 200}]},
            "terms.1.width: must be <= 100 GeV; got 200",
        ),
        ({"terms": [{"zz": 1}]}, "terms.0.zz: unknown option; known: on, width"),
        ({"name": "too long"}, "name: must have at most 5 letters; got 'too long'"),
        (
            {"count": "many"},
            "count: must be a whole number; got 'many'",
        ),
        ({"count": 2.5}, "count: must be a whole number; got 2.5"),
        ({"size": [1]}, "size: must be a number; got [1]"),
        ({"limit": "wide"}, "limit: must be a number [rad]; got 'wide'"),
        ({"name": 3}, "name: must be text; got 3"),
        ({"terms": 3}, "terms: must be a list; got 3"),
        ({"terms": [3]}, "terms.0: must be a table of settings; got 3"),
        ({"inner": {"on": "maybe"}}, "inner.on: must be true or false; got 'maybe'"),
        ({"inner": 3}, "inner: must be a table of settings; got 3"),
    ],
)
def test_a_wrong_setting_is_one_sentence(settings, sentence):
    with pytest.raises(OptionError) as caught:
        Settings(**settings)
    assert str(caught.value) == sentence
    with pytest.raises(OptionError) as again:
        Settings().replace(**settings)
    assert str(again.value) == sentence


def test_a_missing_setting_is_named():
    with pytest.raises(OptionError, match=r"^value: required, but not given$"):
        Needed()


def test_several_mistakes_are_all_named():
    with pytest.raises(OptionError) as caught:
        Settings(count=0, size=-1)
    assert str(caught.value) == "count: must be >= 1; got 0; size: must be > 0; got -1"


def test_settings_cannot_be_changed_in_place():
    with pytest.raises(Exception, match="frozen"):
        Settings().count = 4


def test_replace_leaves_the_old_one_alone():
    old = Settings()
    new = old.replace(count=4)
    assert (old.count, new.count) == (3, 4)
    assert old.replace() == old


def test_equal_settings_have_equal_hashes():
    assert hash(Settings(count=4)) == hash(Settings().replace(count=4))
    assert Settings(count=4) != Settings()
    assert len({Settings(), Settings(), Settings(count=4)}) == 2


@given(
    count=st.integers(1, 9),
    size=st.floats(1e-300, 1e300),
    kind=st.sampled_from(Kind),
    widths=st.lists(st.floats(0.1, 100), max_size=3),
    limit=st.one_of(st.none(), st.floats(-1e9, 1e9)),
)
def test_plain_data_round_trip(count, size, kind, widths, limit):
    one = Settings(
        count=count,
        size=size,
        kind=kind,
        terms=tuple(Term(width=w) for w in widths),
        limit=limit,
    )
    data = one.to_mapping()
    assert Settings(**data) == one
    assert ("limit" in data) == (limit is not None)
    assert isinstance(data["kind"], str)
    assert isinstance(data["terms"], list)


def test_the_declaration_carries_unit_and_meaning():
    field = Term.model_fields["width"]
    assert field.description == "width"
    assert field.json_schema_extra["unit"] == "GeV"
