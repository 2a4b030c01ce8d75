"""How much of each template a histogram holds."""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import ArrayLike, NDArray

from toprecon.errors import StudyError

FloatArray = NDArray[np.float64]

ITERATIONS = 20


@dataclasses.dataclass(frozen=True)
class TemplateFit:
    """Yields of templates in a histogram.

    Parameters
    ----------
    yields : array, shape (T,)
        Sum over the bins that each template stands for.
    covariance : array, shape (T, T)
        Of the yields; statistics of the histogram and of the templates.
    expected : array, shape (B,)
        Sum of the scaled templates and what was held fixed.
    chi2 : float
        Of the fit.
    degrees : int
        Bins less templates.
    """

    yields: FloatArray
    covariance: FloatArray
    expected: FloatArray
    chi2: float
    degrees: int


def fit_templates(
    data: ArrayLike,
    templates: ArrayLike,
    template_variances: ArrayLike,
    *,
    fixed: ArrayLike | None = None,
    fixed_variance: ArrayLike | None = None,
    fixed_error: float = 0.0,
) -> TemplateFit:
    """Fit yields of templates to a histogram by iterated generalised least squares.

    Parameters
    ----------
    data : array, shape (B,)
        Sums of weights.
    templates : array, shape (T, B)
        Sums of weights of each kind; only their shapes matter.
    template_variances : array, shape (T, B)
        Their sums of squared weights.
    fixed, fixed_variance : array, shape (B,), optional
        What else is in the histogram, on its scale, with the variance that it has.
    fixed_error : float
        Relative error of the size of ``fixed``, the same in all bins.

    Returns
    -------
    TemplateFit
        The variance of a bin is that which the model expects of a histogram with the
        weights of the templates, plus that of the scaled templates themselves.

    Raises
    ------
    StudyError
        If a template is empty, or there are fewer bins than templates.

    Notes
    -----
    The statistics of the templates enter bin by bin, one number per bin for all of them:
    R. Barlow, C. Beeston, Comput. Phys. Commun. 77 (1993) 219, simplified as in
    J. S. Conway, arXiv:1103.0354, with normal instead of Poisson errors.
    """
    y, shape = np.asarray(data, float), np.asarray(templates, float)
    variance = np.asarray(template_variances, float)
    rest = np.zeros(len(y)) if fixed is None else np.asarray(fixed, float)
    rest_variance = (
        np.zeros(len(y))
        if fixed_variance is None
        else np.asarray(fixed_variance, float)
    )
    total = shape.sum(axis=1)
    if (total <= 0).any() or len(y) < len(shape):
        msg = (
            "template fit: every template must have a positive sum, and there must be at "
            f"least one bin per template; got sums {np.array2string(total)} and "
            f"{len(y)} bins"
        )
        raise StudyError(msg)
    unit, unit_variance = shape / total[:, None], variance / total[:, None]
    n = np.full(len(shape), max(float((y - rest).sum()), 1e-12) / len(shape))
    common = np.outer(fixed_error * rest, fixed_error * rest)
    for _ in range(ITERATIONS):
        scale = np.maximum(n, 0.0)
        # a weight w counts w in the sum and w^2 in its variance
        of_data = scale @ unit_variance + rest_variance
        of_templates = (scale**2 / total) @ unit_variance
        diagonal = of_data + of_templates
        floor = 1e-9 * max(float(diagonal.max()), 1e-300)
        full = np.diag(np.maximum(diagonal, floor)) + common
        left = np.linalg.solve(full, unit.T)
        covariance = np.linalg.inv(unit @ left)
        new = covariance @ (left.T @ (y - rest))
        settled = np.allclose(new, n, rtol=1e-10, atol=1e-12)
        n = new
        if settled:
            break
    expected = n @ unit + rest
    difference = y - expected
    chi2 = float(difference @ np.linalg.solve(full, difference))
    return TemplateFit(n, covariance, expected, chi2, len(y) - len(n))
