from __future__ import annotations

import json
import math

import pytest

from toprecon.statistics import Measured


# Two significant digits of the error, and the value to the same place: the rule of
# the Guide to the expression of uncertainty in measurement (JCGM 100:2008, 7.2.6).
@pytest.mark.parametrize(
    ("value", "error", "text"),
    [
        (0.380123, 0.00321, "0.3801 +- 0.0032"),
        (-0.0771, 0.0062, "-0.0771 +- 0.0062"),
        (12345.6, 12.3, "12346 +- 12"),
        (1234567.0, 12345.0, "1234567 +- 12345"),
        (0.5, 0.0, "0.5000 +- 0.0000"),
        (0.25, math.nan, "0.2500 +- missing"),
        (math.nan, math.nan, "missing"),
        (0.1, 1e-20, "0.1000 +- 0.0000"),
    ],
)
def test_numbers_are_printed_to_two_digits_of_their_error(value, error, text):
    assert str(Measured(value, error)) == text


def test_missing_numbers_become_none_in_plain_data():
    data = Measured(math.nan, math.inf).to_mapping()
    assert json.loads(json.dumps(data, allow_nan=False)) == {
        "value": None,
        "error": None,
    }
    assert Measured(0.5, 0.25).to_mapping() == {"value": 0.5, "error": 0.25}
