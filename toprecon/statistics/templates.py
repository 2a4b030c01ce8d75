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
    errors : array, shape (B,)
        Of every bin in the fit: statistics of the histogram and of the templates.
    chi2 : float
        Of the fit.
    degrees : int
        Bins less templates.
    """

    yields: FloatArray
    covariance: FloatArray
    expected: FloatArray
    errors: FloatArray
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
    data_weight: float | None = None,
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
    data_weight : float, optional
        Sum of squared weights over sum of weights of the histogram: 1 for counts. If
        absent, the histogram has the weights of the templates, and ``fixed_variance``
        holds its share of the variance as well.

    Returns
    -------
    TemplateFit
        The covariance of the bins is that which the model expects of the histogram,
        plus that of the shapes of the scaled templates themselves.

    Raises
    ------
    StudyError
        If a template is empty, or there are fewer bins than templates.

    Notes
    -----
    Statistics of templates are part of the errors of the histogram, as proposed by
    R. Barlow, C. Beeston, Comput. Phys. Commun. 77 (1993) 219, in the form of J. S.
    Conway, arXiv:1103.0354: one number per bin for all templates. Here these are
    integrated out as normal variables, and keep the correlation of bins of one shape
    (multinomial for unit weights), since templates are scaled to a sum of one.
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
    of_rest = np.diag(rest_variance) + fixed_error**2 * np.outer(rest, rest)
    of_shapes = np.array(
        [_shape_covariance(*t) for t in zip(shape, variance, strict=True)]
    )
    for _ in range(ITERATIONS):
        scale = np.maximum(n, 0.0)
        # a weight w counts w in the sum and w^2 in its variance
        of_data = (
            scale @ unit_variance
            if data_weight is None
            else data_weight * np.maximum(scale @ unit + rest, 0.0)
        )
        full = np.diag(of_data) + of_rest + np.tensordot(scale**2, of_shapes, 1)
        # bins in which nothing is expected have no error of their own
        floor = 1e-9 * max(float(np.diag(full).max()), 1e-300)
        full += np.diag(np.maximum(floor - of_data, 0.0))
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
    errors = np.sqrt(np.diag(full))
    return TemplateFit(n, covariance, expected, errors, chi2, len(y) - len(n))


def _shape_covariance(template: FloatArray, variance: FloatArray) -> FloatArray:
    """Covariance of a template divided by its sum, which takes no error from its size."""
    total = template.sum()
    p = template / total
    mixed = np.outer(p, variance)
    spread = np.diag(variance) - mixed - mixed.T + variance.sum() * np.outer(p, p)
    return np.asarray(spread / total**2)
