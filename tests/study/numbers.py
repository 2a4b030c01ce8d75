"""Comparing results number by number."""

from __future__ import annotations

import math


def leaves(data, path=""):
    """Every number and text of nested plain data, by path."""
    if isinstance(data, dict):
        for key, value in data.items():
            yield from leaves(value, f"{path}.{key}")
    elif isinstance(data, list):
        for index, value in enumerate(data):
            yield from leaves(value, f"{path}.{index}")
    else:
        yield path, data


def numbers_of(result):
    """Numbers of a result without those that belong to the input files."""
    data = result.to_mapping()
    del data["input"]
    del data["inputs"]
    return dict(leaves(data))


def differences(first, second, *, tolerance):
    """Paths at which two sets of numbers differ by more than a tolerance."""
    assert set(first) == set(second)
    out = {}
    for path, a in first.items():
        b = second[path]
        if isinstance(a, float) and isinstance(b, float):
            if not math.isclose(a, b, rel_tol=tolerance, abs_tol=tolerance):
                out[path] = (a, b)
        elif a != b:
            out[path] = (a, b)
    return out
