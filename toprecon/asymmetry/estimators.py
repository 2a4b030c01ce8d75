"""Two estimators of A_FB from a spectrum: counting, and a fit of the angular terms.

The fit is an effective one: (1 + cos^2), sin^2 and cos are the terms of the tree
level in the pair frame; radiation, selection and migrations change the shape. Both
estimators see a stated range of |cos(theta)| only and are extrapolated to the full
range with the shape of the generated events.
"""

from __future__ import annotations

import dataclasses
from typing import Any

import numpy as np
from numpy.typing import NDArray
from pydantic import field_validator

from toprecon.asymmetry.spectra import BINS, AngleSpectra
from toprecon.errors import OptionError, nearest
from toprecon.options import Options, option
from toprecon.statistics import Estimate, Measured, asymmetry_of_spectrum, ratio

FloatArray = NDArray[np.float64]

TERMS = ("1 + cos^2", "sin^2", "cos")
"""Terms of the fit, in the order of the coefficients."""

SHARE_OF_TOTAL = np.array([8 / 3, 4 / 3, 0.0])
SHARE_OF_DIFFERENCE = np.array([0.0, 0.0, 1.0])
"""Integral over all angles, and forward minus backward, of each term."""

_MAX_STEPS = 50


class EstimatorOptions(Options):
    """Range of the angle that the estimators of A_FB see."""

    largest_cosine: float = option(
        1.0, "largest |cos(theta)| used, an edge of the 40 bins", above=0, high=1
    )

    @field_validator("largest_cosine")
    @classmethod
    def _is_edge(cls, value: float) -> float:
        nearest_edge = min(BINS.edges, key=lambda edge: abs(edge - value))
        if abs(nearest_edge - value) > 1e-9:
            msg = (
                f"must be a multiple of {BINS.widths[0]:g}, where bins end; got {value}"
            )
            raise ValueError(msg)
        return value


@dataclasses.dataclass(frozen=True)
class AngularFit:
    """Weighted fit of the three angular terms.

    Parameters
    ----------
    coefficients : array, shape (3,)
        Of :data:`TERMS`, in events per unit of cos(theta).
    gradient : array, shape (3, B)
        Derivatives of the coefficients by the contents of all bins.
    covariance : array, shape (3, 3)
        Of the coefficients.
    chi2 : float
        Sum of squared deviations over the variances.
    degrees : int
        Bins minus coefficients.
    """

    coefficients: FloatArray
    gradient: FloatArray
    covariance: FloatArray
    chi2: float
    degrees: int

    @property
    def asymmetry(self) -> Estimate:
        """A_FB of the fitted curve over all angles, by the contents of the bins."""
        of_terms = ratio(SHARE_OF_DIFFERENCE, SHARE_OF_TOTAL, self.coefficients)
        return Estimate(of_terms.value, of_terms.gradient @ self.gradient)

    @property
    def probability(self) -> float:
        """Probability of a larger chi-square."""
        from scipy.stats import chi2

        return float(chi2.sf(self.chi2, self.degrees)) if self.degrees > 0 else 1.0

    def curve(self, cosines: Any) -> FloatArray:
        """Return the fitted events per unit of cos(theta).

        Parameters
        ----------
        cosines : array
            Angles.

        Returns
        -------
        array
            Same shape.
        """
        c = np.asarray(cosines, dtype=np.float64)
        a, b, k = self.coefficients
        return a * (1 + c**2) + b * (1 - c**2) + k * c


@dataclasses.dataclass(frozen=True)
class Estimator:
    """One estimator.

    Parameters
    ----------
    in_range : Measured
        What it gives in the range of |cos(theta)|.
    factor : Measured
        A_FB of all generated signal events over what the estimator makes of them;
        with the error of the simulated sample.
    extrapolated : Measured
        Their product. The error is that of ``in_range``: the factor is taken as known.
    """

    in_range: Measured
    factor: Measured
    extrapolated: Measured


@dataclasses.dataclass(frozen=True)
class EstimatorResult:
    """Counting and fit of one spectrum.

    Parameters
    ----------
    spectrum : str
        Name of the spectrum.
    largest_cosine : float
        Range used.
    counting, fit : Estimator
        The two.
    correlation : float
        Of the two, in the simulated sample.
    angular_fit : AngularFit
        Details of the fit.
    """

    spectrum: str
    largest_cosine: float
    counting: Estimator
    fit: Estimator
    correlation: float
    angular_fit: AngularFit

    def __str__(self) -> str:
        return (
            f"|cos| < {self.largest_cosine:g}, extrapolated with the generated shape: "
            f"counting {self.counting.extrapolated}, fit of the angular terms "
            f"{self.fit.extrapolated}, correlation {self.correlation:.2f}"
        )


def fit_terms(sums: Any, variances: Any, used: NDArray[np.bool_]) -> AngularFit:
    """Fit the three angular terms to a spectrum of the 40 fine bins.

    Parameters
    ----------
    sums, variances : array, shape (B,)
        Sums of weights and of squared weights.
    used : array of bool, shape (B,)
        Bins in the fit.

    Returns
    -------
    AngularFit
        NaN for an empty spectrum.

    Notes
    -----
    Least squares with variances proportional to the *fitted* contents, iterated to
    the fixed point: for unit weights that is the maximum of the Poisson likelihood.
    Taking the variances from the contents would pull the curve down. The covariance is
    M diag(variances) M^T with the linear response M of the fit, right for any weights.
    """
    h, v = (np.asarray(x, dtype=np.float64) for x in (sums, variances))
    terms = _integrals()[used]
    n_bins = int(used.sum())
    gradient = np.zeros((3, len(h)))
    if n_bins < 3 or h[used].sum() <= 0:
        nan = np.full((3, 3), np.nan)
        return AngularFit(nan[0], gradient * np.nan, nan, float("nan"), n_bins - 3)
    mean_weight = v[used].sum() / h[used].sum()
    fitted = np.full(n_bins, h[used].mean())
    for _ in range(_MAX_STEPS):
        scaled = terms / fitted[:, None]
        linear = np.linalg.solve(scaled.T @ terms, scaled.T)
        coefficients = linear @ h[used]
        new = terms @ coefficients
        # empty or negative contents: keep every variance positive
        new = np.maximum(new, 1e-3 * h[used].mean())
        done = np.allclose(new, fitted, rtol=1e-12, atol=0)
        fitted = new
        if done:
            break
    gradient[:, used] = linear
    deviation = h[used] - terms @ coefficients
    return AngularFit(
        coefficients=coefficients,
        gradient=gradient,
        covariance=(gradient * v) @ gradient.T,
        chi2=float((deviation**2 / (fitted * mean_weight)).sum()),
        degrees=n_bins - 3,
    )


def estimate(
    spectra: AngleSpectra,
    options: EstimatorOptions | None = None,
    *,
    spectrum: str = "reconstructed",
) -> EstimatorResult:
    """Estimate A_FB of a spectrum by counting and by a fit.

    Parameters
    ----------
    spectra : AngleSpectra
        Of an :class:`~toprecon.asymmetry.AsymmetryResult`.
    options : EstimatorOptions, optional
        Range of |cos(theta)|.
    spectrum : str
        ``"reconstructed"`` (all selected events) or a name of
        :data:`~toprecon.asymmetry.VARIANTS`.

    Returns
    -------
    EstimatorResult
        NaN for an empty spectrum.

    Raises
    ------
    OptionError
        If there is no such spectrum.
    """
    options = options or EstimatorOptions()
    known = {"reconstructed", *spectra.sums}
    if spectrum not in known:
        msg = f"spectrum: no such spectrum {spectrum!r}{nearest(spectrum, known)}"
        raise OptionError(msg)
    used = np.abs(BINS.centres) < options.largest_cosine
    h, v = spectra.rebinned(spectrum, 1)
    h_true, v_true = spectra.rebinned("generated", 1)
    whole = asymmetry_of_spectrum(h_true, BINS.array)
    fit, fit_true = fit_terms(h, v, used), fit_terms(h_true, v_true, used)
    counted, counted_true = _counted(h, used), _counted(h_true, used)
    covariance, covariance_true = np.diag(v), np.diag(v_true)
    both = counted.covariance(fit.asymmetry, covariance)
    errors = [e.measured(covariance).error for e in (counted, fit.asymmetry)]
    product = errors[0] * errors[1]
    return EstimatorResult(
        spectrum=spectrum,
        largest_cosine=options.largest_cosine,
        counting=_extrapolate(
            counted, counted_true, whole, covariance, covariance_true
        ),
        fit=_extrapolate(
            fit.asymmetry, fit_true.asymmetry, whole, covariance, covariance_true
        ),
        correlation=both / product if product > 0 else float("nan"),
        angular_fit=fit,
    )


def _counted(sums: FloatArray, used: NDArray[np.bool_]) -> Estimate:
    """A_FB counted in some bins."""
    signs = np.where(BINS.centres > 0, 1.0, -1.0)
    return ratio(signs * used, used.astype(np.float64), sums)


def _extrapolate(
    found: Estimate,
    generated: Estimate,
    whole: Estimate,
    covariance: FloatArray,
    covariance_true: FloatArray,
) -> Estimator:
    """Scale an estimator so that it is right for the generated events."""
    in_range = found.measured(covariance)
    if not generated.value:
        factor = Measured(float("nan"), float("nan"))
    else:
        value = whole.value / generated.value
        gradient = (whole.gradient - value * generated.gradient) / generated.value
        factor = Estimate(value, gradient).measured(covariance_true)
    return Estimator(
        in_range,
        factor,
        Measured(in_range.value * factor.value, in_range.error * abs(factor.value)),
    )


def _integrals() -> FloatArray:
    """Integrals of the three terms over the fine bins, shape (B, 3)."""
    e = BINS.array
    return np.diff(np.stack([e + e**3 / 3, e - e**3 / 3, e**2 / 2], axis=1), axis=0)
