from __future__ import annotations

import math

import numpy as np
import pytest

from toprecon.statistics import Estimate, asymmetry_from_counts, ratio


def numeric_gradient(function, x, step=1e-6):
    """Central differences."""
    out = np.empty(len(x))
    for i in range(len(x)):
        h = step * max(abs(x[i]), 1.0)
        up, down = x.copy(), x.copy()
        up[i] += h
        down[i] -= h
        out[i] = (function(up) - function(down)) / (2 * h)
    return out


def test_arithmetic_has_the_right_derivatives(rng):
    x = rng.uniform(1, 5, 6)
    c = [rng.normal(size=6) for _ in range(2)] + [rng.uniform(1, 2, 6)]

    def everything(y):
        first, second = (c[0] @ y) / (c[2] @ y), (c[1] @ y) / (c[2] @ y)
        return first * second + first - second / (first + 3)

    a, b = ratio(c[0], c[2], x), ratio(c[1], c[2], x)
    found = a * b + a - b / (a + Estimate.constant(3.0, 6))
    assert found.value == pytest.approx(everything(x), rel=1e-13)
    # central differences are good to about 1e-9
    assert found.gradient == pytest.approx(numeric_gradient(everything, x), abs=1e-7)


def test_ratio_reproduces_the_asymmetry_of_counts():
    sums = np.array([700.0, 300.0])
    a = ratio(np.array([1.0, -1.0]), np.array([1.0, 1.0]), sums)
    m = a.measured(np.diag([900.0, 250.0]))
    expected = asymmetry_from_counts(700, 300, 900, 250)
    assert (m.value, m.error) == pytest.approx((expected.value, expected.error))


def test_covariance_is_symmetric_and_bilinear(rng):
    of_sums = np.cov(rng.normal(size=(4, 50)))
    a, b, c = (Estimate(0.0, rng.normal(size=4)) for _ in range(3))
    assert a.covariance(b, of_sums) == pytest.approx(b.covariance(a, of_sums))
    assert (a + b).covariance(c, of_sums) == pytest.approx(
        a.covariance(c, of_sums) + b.covariance(c, of_sums)
    )


def test_a_vanishing_denominator_gives_a_missing_number():
    a = ratio(np.ones(2), np.ones(2), np.zeros(2))
    assert math.isnan((Estimate(1.0, np.ones(2)) / Estimate(0.0, np.ones(2))).value)
    m = a.measured(np.eye(2))
    assert math.isnan(m.value)
    assert math.isnan(m.error)


def test_rounding_below_zero_is_no_error():
    a = Estimate(1.0, np.array([1.0, -1.0]))
    of_sums = np.full((2, 2), 1.0)
    of_sums[0, 1] = of_sums[1, 0] = 1 + 1e-12  # not quite positive definite
    assert a.measured(of_sums).error == 0.0
