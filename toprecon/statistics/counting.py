"""Asymmetries and fractions from weighted counts."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from toprecon.statistics.measured import Measured


def asymmetry_from_counts(
    forward: float,
    backward: float,
    forward_variance: float | None = None,
    backward_variance: float | None = None,
) -> Measured:
    """Return (N_F - N_B)/(N_F + N_B) with its error.

    Parameters
    ----------
    forward, backward : float
        Sums of weights.
    forward_variance, backward_variance : float, optional
        Sums of squared weights; the sums themselves (unit weights) if absent.

    Returns
    -------
    Measured
        NaN for an empty sample. Both classes are taken as independent Poisson
        variables: variance 4 (N_B^2 S_F + N_F^2 S_B)/(N_F + N_B)^4, which is
        (1 - A^2)/N for unit weights.
    """
    s_f = forward if forward_variance is None else forward_variance
    s_b = backward if backward_variance is None else backward_variance
    total = forward + backward
    if total == 0:
        return Measured(float("nan"), float("nan"))
    variance = 4 * (backward**2 * s_f + forward**2 * s_b) / total**4
    return Measured(float((forward - backward) / total), float(np.sqrt(variance)))


def fraction_from_counts(
    passed: float,
    failed: float,
    passed_variance: float | None = None,
    failed_variance: float | None = None,
) -> Measured:
    """Return N_pass/(N_pass + N_fail) with its error.

    Parameters
    ----------
    passed, failed : float
        Sums of weights of two disjoint samples.
    passed_variance, failed_variance : float, optional
        Sums of squared weights; the sums themselves (unit weights) if absent.

    Returns
    -------
    Measured
        Half of the asymmetry plus one half: variance e (1 - e)/N for unit weights.
    """
    a = asymmetry_from_counts(passed, failed, passed_variance, failed_variance)
    return Measured(0.5 * (1 + a.value), 0.5 * a.error)


def weighted_share(weight: ArrayLike, those: ArrayLike) -> Measured:
    """Return the share of some rows in the sum of weights, with its error.

    Parameters
    ----------
    weight : array, shape (E,)
        Weights.
    those : array of bool, shape (E,)
        The rows whose share is wanted.

    Returns
    -------
    Measured
        As :func:`fraction_from_counts` has it; NaN for an empty sample.
    """
    w, found = np.asarray(weight, dtype=np.float64), np.asarray(those, dtype=bool)
    inside, outside = w[found], w[~found]
    return fraction_from_counts(
        float(inside.sum()),
        float(outside.sum()),
        float(inside @ inside),
        float(outside @ outside),
    )
