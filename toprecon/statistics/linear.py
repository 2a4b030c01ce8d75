"""Linear error propagation: values that carry their derivatives.

An :class:`Estimate` is a function of a fixed vector of sums together with its
gradient. Arithmetic follows the rules of differentiation, so the variance of any
result, and the covariance of any two, is g^T C h with the covariance C of the sums
(the delta method of every statistics textbook).
"""

from __future__ import annotations

import dataclasses
from typing import Self

import numpy as np
from numpy.typing import NDArray

from toprecon.statistics.measured import Measured

FloatArray = NDArray[np.float64]


@dataclasses.dataclass(frozen=True)
class Estimate:
    """A value with its gradient in the space of the sums.

    Parameters
    ----------
    value : float
        The number; NaN if it is undefined.
    gradient : array, shape (K,)
        Derivatives with respect to the K sums.
    """

    value: float
    gradient: FloatArray

    def __add__(self, other: Estimate) -> Estimate:
        return Estimate(self.value + other.value, self.gradient + other.gradient)

    def __sub__(self, other: Estimate) -> Estimate:
        return Estimate(self.value - other.value, self.gradient - other.gradient)

    def __mul__(self, other: Estimate) -> Estimate:
        return Estimate(
            self.value * other.value,
            self.value * other.gradient + other.value * self.gradient,
        )

    def __truediv__(self, other: Estimate) -> Estimate:
        if other.value == 0:
            return Estimate(float("nan"), np.full(len(self.gradient), np.nan))
        value = self.value / other.value
        return Estimate(value, (self.gradient - value * other.gradient) / other.value)

    @classmethod
    def constant(cls, value: float, size: int) -> Self:
        """Return a number that does not depend on the sums."""
        return cls(value, np.zeros(size))

    def covariance(self, other: Estimate, of_sums: FloatArray) -> float:
        """Return the covariance with another estimate, given that of the sums."""
        return float(self.gradient @ of_sums @ other.gradient)

    def measured(self, of_sums: FloatArray) -> Measured:
        """Return the value with its error, given the covariance of the sums."""
        variance = self.covariance(self, of_sums)
        return Measured(self.value, float(np.sqrt(max(variance, 0.0))))


def ratio(numerator: FloatArray, denominator: FloatArray, sums: FloatArray) -> Estimate:
    """Return the ratio of two linear combinations of sums.

    Parameters
    ----------
    numerator, denominator : array, shape (K,)
        Coefficients.
    sums : array, shape (K,)
        The sums.

    Returns
    -------
    Estimate
        NaN, with a gradient of NaN, for a vanishing denominator.
    """
    below = float(denominator @ sums)
    if below == 0:
        return Estimate(float("nan"), np.full(len(sums), np.nan))
    value = float(numerator @ sums) / below
    return Estimate(value, (numerator - value * denominator) / below)
