"""Random numbers addressed by event, object and purpose."""

from __future__ import annotations

import numpy as np
import pytest

from toprecon.generation.counters import Purpose, normals, uniforms

IDS = np.arange(200_000, dtype=np.uint64)
FIRST = np.zeros(200_000, dtype=np.int64)


def test_numbers_are_uniform():
    from scipy.stats import kstest

    for purpose in (Purpose.ENERGY, Purpose.BTAG):
        u = uniforms(IDS, FIRST, purpose)
        assert u.min() > 0
        assert u.max() < 1
        assert kstest(u, "uniform").pvalue > 5.7e-7  # 5 sigma, fixed input


@pytest.mark.parametrize(
    ("ids", "index", "purpose"),
    [
        (IDS, FIRST, Purpose.BTAG),
        (IDS, FIRST + 1, Purpose.ENERGY),
        (IDS + np.uint64(1), FIRST, Purpose.ENERGY),
    ],
)
def test_neighbours_are_independent(ids, index, purpose):
    start = normals(IDS, FIRST, Purpose.ENERGY)
    other = normals(ids, index, purpose)
    # 5 sigma of a correlation coefficient
    assert abs(np.corrcoef(start, other)[0, 1]) < 5 / np.sqrt(len(IDS))


def test_normal_numbers_have_mean_zero_and_width_one():
    x = normals(IDS, FIRST, Purpose.ENERGY)
    assert np.mean(x) == pytest.approx(0, abs=5 / np.sqrt(len(x)))
    assert np.std(x) == pytest.approx(1, abs=5 / np.sqrt(2 * len(x)))


def test_a_number_does_not_depend_on_its_company():
    whole = uniforms(IDS[:50], np.arange(50), Purpose.ENERGY)
    assert uniforms(IDS[7:8], np.array([7]), Purpose.ENERGY)[0] == whole[7]
