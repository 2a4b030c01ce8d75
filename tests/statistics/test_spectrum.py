from __future__ import annotations

import math

import numpy as np
import pytest

from toprecon.errors import StudyError
from toprecon.statistics import (
    asymmetry_from_counts,
    asymmetry_from_spectrum,
    asymmetry_of_spectrum,
)

EDGES = (-1, -0.5, 0, 0.3, 1)


def test_independent_bins_give_the_asymmetry_of_their_counts():
    values, variances = [10.0, 20.0, 40.0, 50.0], [12.0, 25.0, 44.0, 61.0]
    a = asymmetry_from_spectrum(values, variances, EDGES)
    expected = asymmetry_from_counts(90, 30, 105, 37)
    assert (a.value, a.error) == pytest.approx((expected.value, expected.error))
    same = asymmetry_from_spectrum(values, np.diag(variances), EDGES)
    assert (same.value, same.error) == (a.value, a.error)


def test_correlated_bins_are_propagated(rng):
    values = np.array([100.0, 200.0, 400.0, 500.0])
    root = rng.normal(size=(4, 4)) + 4 * np.eye(4)
    covariance = root @ root.T
    toys = rng.multivariate_normal(values, covariance, 20_000)
    spread = np.std((toys[:, 2:].sum(1) - toys[:, :2].sum(1)) / toys.sum(1))
    error = asymmetry_from_spectrum(values, covariance, EDGES).error
    # the spread is known to 0.5 %; 5 sigma; the ratio is linear here to 1 %
    assert error == pytest.approx(spread, rel=0.035)


def test_derivatives_are_those_of_the_ratio():
    values = np.array([1.0, 2.0, 3.0, 4.0])
    found = asymmetry_of_spectrum(values, EDGES)
    assert found.value == pytest.approx(0.4)
    # d/dx_i (F - B)/(F + B) = (s_i - A)/N
    assert found.gradient == pytest.approx((np.array([-1, -1, 1, 1]) - 0.4) / 10)


def test_a_bin_across_zero_is_refused():
    with pytest.raises(StudyError, match="0 must be an edge of the bins"):
        asymmetry_of_spectrum([1.0, 1.0], (-1, 0.1, 1))


def test_an_empty_spectrum_has_no_asymmetry():
    assert math.isnan(asymmetry_from_spectrum([0, 0], [0, 0], (-1, 0, 1)).value)
