"""From a reconstructed spectrum back to the generated one.

Three published ways: inversion (unbiased, oscillating), Tikhonov regularisation
(smooth relative to the simulation), iterated Bayes (a few steps from the simulation
towards the inversion). None knows anything that the response does not: see the
linearity tests for what happens if data differ from the simulation.
"""

from __future__ import annotations

import dataclasses
from enum import StrEnum
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import StudyError
from toprecon.events import Binning
from toprecon.migration.matrix import MigrationMatrix
from toprecon.options import Options, option
from toprecon.statistics import Measured, asymmetry_from_spectrum

FloatArray = NDArray[np.float64]


class Method(StrEnum):
    """How a spectrum is unfolded."""

    INVERSION = "inversion"
    TIKHONOV = "tikhonov"
    BAYES = "bayes"


class UnfoldingOptions(Options):
    """Method of the unfolding and how strongly it smooths."""

    method: Method = option(Method.INVERSION, "inversion, tikhonov or bayes")
    strength: float | None = option(
        None,
        "tikhonov: weight of the curvature; least mean global correlation if absent",
        low=0,
    )
    iterations: int = option(4, "bayes: steps from the simulated spectrum", low=1)


@dataclasses.dataclass(frozen=True)
class Unfolded:
    """An unfolded spectrum.

    Parameters
    ----------
    binning : Binning
        Bins of the generated cos(theta), T of them.
    values : array, shape (T,)
        Estimate of the generated events, selected or not.
    covariance : array, shape (T, T)
        From the covariance of the data.
    gradient : array, shape (T, R)
        Derivatives by the contents of the R reconstructed bins.
    method : Method
        Used.
    strength : float
        Weight of the curvature (tikhonov) or number of iterations (bayes); else 0.
    """

    binning: Binning
    values: FloatArray
    covariance: FloatArray
    gradient: FloatArray
    method: Method
    strength: float

    @property
    def asymmetry(self) -> Measured:
        """A_FB of the unfolded spectrum."""
        return asymmetry_from_spectrum(self.values, self.covariance, self.binning.array)

    @property
    def global_correlations(self) -> FloatArray:
        """Correlation of each bin with the best combination of the others."""
        return _global_correlations(self.covariance)


def unfold(
    matrix: MigrationMatrix,
    data: Any,
    options: UnfoldingOptions | None = None,
    *,
    covariance: Any = None,
) -> Unfolded:
    """Unfold a reconstructed spectrum.

    Parameters
    ----------
    matrix : MigrationMatrix
        Response, fakes and background of the simulation; the background must be
        scaled to the data.
    data : array, shape (R,)
        Selected events per reconstructed bin, background included.
    options : UnfoldingOptions, optional
        Method.
    covariance : array, shape (R,) or (R, R), optional
        Variances or covariance of the data; Poisson if absent.

    Returns
    -------
    Unfolded
        With the derivatives, so that other covariances can be propagated.

    Raises
    ------
    StudyError
        If a generated bin is empty, or there are fewer reconstructed bins than
        generated ones.

    References
    ----------
    S. Schmitt, arXiv:1611.01927 (least squares, Tikhonov, choice of the strength);
    G. D'Agostini, Nucl. Instrum. Meth. A362 (1995) 487 (iterated Bayes).
    """
    options = options or UnfoldingOptions()
    y = np.asarray(data, dtype=np.float64)
    t, r = len(matrix.true_binning), len(matrix.reco_binning)
    if y.shape != (r,):
        msg = f"unfolding: data of shape ({r},) are required; got {y.shape}"
        raise StudyError(msg)
    _check(matrix, t, r)
    c = np.asarray(y if covariance is None else covariance, dtype=np.float64)
    full = np.diag(c) if c.ndim == 1 else c
    from_signal = signal_share(matrix)
    signal = (y - matrix.background) * from_signal
    scaled = full * np.outer(from_signal, from_signal)
    response = matrix.response.T  # (R, T): what the data should be for a given truth
    if options.method is Method.BAYES:
        values, gradient = _bayes(response, signal, matrix, options.iterations)
        strength = float(options.iterations)
    else:
        regularised = options.method is Method.TIKHONOV
        strength = (options.strength or 0.0) if regularised else 0.0
        if regularised and options.strength is None:
            strength = best_strength(matrix, signal, scaled)
        values, gradient = _least_squares(response, signal, scaled, matrix, strength)
    return Unfolded(
        binning=matrix.true_binning,
        values=values,
        covariance=gradient @ scaled @ gradient.T,
        gradient=gradient * from_signal,
        method=options.method,
        strength=strength,
    )


def signal_share(matrix: MigrationMatrix) -> FloatArray:
    """Return the share of the signal process that comes from inside, shape (R,).

    One minus the fakes: events from outside the truth phase space are removed as a
    share, because they grow with the signal; 1 where the simulation has no event.

    Parameters
    ----------
    matrix : MigrationMatrix
        The matrix.

    Returns
    -------
    array, shape (R,)
        In [0, 1] for weights of one sign.
    """
    inside = matrix.counts.sum(axis=0)
    both = inside + matrix.from_outside
    return np.where(both != 0, inside / np.where(both != 0, both, 1.0), 1.0)


def _check(matrix: MigrationMatrix, t: int, r: int) -> None:
    """Refuse a matrix that cannot be unfolded with."""
    if r < t:
        msg = (
            "unfolding: at least as many reconstructed bins as generated ones are "
            f"required; got {r} and {t}; choose wider generated bins"
        )
        raise StudyError(msg)
    empty = np.flatnonzero(matrix.counts.sum(axis=1) <= 0)
    if len(empty):
        low, high = matrix.true_binning.edges[empty[0] : empty[0] + 2]
        msg = (
            "unfolding: selected events in every generated bin are required, but the "
            f"bin [{low:g}, {high:g}] has none; choose wider bins or take more events"
        )
        raise StudyError(msg)


def _least_squares(
    response: FloatArray,
    signal: FloatArray,
    covariance: FloatArray,
    matrix: MigrationMatrix,
    strength: float,
) -> tuple[FloatArray, FloatArray]:
    """Least squares with a curvature term; without one, the inversion."""
    square = response.shape[0] == response.shape[1]
    if strength == 0 and square:
        try:
            inverse = np.linalg.inv(response)
        except np.linalg.LinAlgError:
            msg = (
                "unfolding: a response that can be inverted is required; choose wider "
                "bins or a regularised method"
            )
            raise StudyError(msg) from None
        return inverse @ signal, np.asarray(inverse, np.float64)
    weights = np.linalg.inv(_floored(covariance))
    curvature = _curvature(matrix, signal)
    normal = response.T @ weights @ response + strength * curvature.T @ curvature
    gradient = np.linalg.solve(normal, response.T @ weights)
    # the simulated shape has no curvature, so it is no source of constant terms
    return gradient @ signal, np.asarray(gradient, np.float64)


def _floored(covariance: FloatArray) -> FloatArray:
    """Give empty bins the smallest variance of the others, to have weights at all."""
    variances = np.diagonal(covariance)
    positive = variances[variances > 0]
    floor = positive.min() if len(positive) else 1.0
    return covariance + np.diag(np.where(variances > 0, 0.0, floor))


def _curvature(matrix: MigrationMatrix, signal: FloatArray) -> FloatArray:
    """Second differences of the ratio to the simulated spectrum, shape (T-2, T)."""
    # to the simulation scaled to the data: the strength should not depend on the size
    # of the simulated sample
    t = len(matrix.true_binning)
    simulated = matrix.counts.sum()
    size = signal.sum() / simulated if simulated and signal.sum() > 0 else 1.0
    second = np.zeros((max(t - 2, 0), t))
    for row in range(t - 2):
        second[row, row : row + 3] = (1.0, -2.0, 1.0)
    return second / (matrix.generated * size)


def best_strength(
    matrix: MigrationMatrix, signal: FloatArray, covariance: FloatArray
) -> float:
    """Return the strength of the least mean global correlation.

    Parameters
    ----------
    matrix : MigrationMatrix
        Response.
    signal : array, shape (R,)
        Signal per reconstructed bin.
    covariance : array, shape (R, R)
        Its covariance.

    Returns
    -------
    float
        One of 61 values on a logarithmic grid.
    """
    response = matrix.response.T
    grid = np.logspace(-4, 8, 61)
    means = []
    for strength in grid:
        _, gradient = _least_squares(response, signal, covariance, matrix, strength)
        found = gradient @ covariance @ gradient.T
        means.append(np.nanmean(_global_correlations(found)))
    return float(grid[int(np.nanargmin(means))])


def _global_correlations(covariance: FloatArray) -> FloatArray:
    """sqrt(1 - 1/(C_jj (C^-1)_jj)); NaN where the covariance is singular."""
    try:
        inverse = np.linalg.inv(covariance)
    except np.linalg.LinAlgError:
        return np.full(len(covariance), np.nan)
    product = np.diagonal(covariance) * np.diagonal(inverse)
    with np.errstate(invalid="ignore", divide="ignore"):
        squared = 1 - 1 / product
    return np.where(product >= 1, np.sqrt(np.maximum(squared, 0.0)), np.nan)


def _bayes(
    response: FloatArray, signal: FloatArray, matrix: MigrationMatrix, iterations: int
) -> tuple[FloatArray, FloatArray]:
    """Iterate Bayes; the derivatives follow the prior through all steps."""
    efficiency = response.sum(axis=0)
    spectrum = matrix.generated.astype(np.float64)
    gradient = np.zeros((response.shape[1], response.shape[0]))
    for _ in range(iterations):
        folded = response @ spectrum
        seen = folded > 0
        inverse = np.where(seen, 1 / np.where(seen, folded, 1.0), 0.0)
        # P(true bin | reconstructed bin), and its derivative by the prior
        shares = response * spectrum * inverse[:, None]
        weighted = signal * inverse
        by_prior = np.diag(response.T @ weighted) - (shares.T * weighted) @ response
        gradient = (shares.T + by_prior @ gradient) / efficiency[:, None]
        spectrum = shares.T @ signal / efficiency
    return spectrum, gradient
