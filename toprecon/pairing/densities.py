"""Gaussian mixtures: a readable density of several correlated quantities."""

from __future__ import annotations

from typing import Self

import numpy as np
from numpy.typing import NDArray
from pydantic import model_validator

from toprecon.errors import OptionError
from toprecon.options import Options, option

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

LEAST_EVENTS_PER_NUMBER = 2  # events a fit needs for each mean and covariance


class Mixture(Options):
    """Weighted sum of normal densities in D dimensions."""

    weights: tuple[float, ...] = option((1.0,), "weight of each component; sum 1")
    means: tuple[tuple[float, ...], ...] = option(((0.0,),), "mean of each component")
    covariances: tuple[tuple[tuple[float, ...], ...], ...] = option(
        (((1.0,),),), "covariance matrix of each component"
    )

    @model_validator(mode="after")
    def _fitting(self) -> Self:
        n, d = len(self.weights), len(self.means[0]) if self.means else 0
        shapes = {len(mean) for mean in self.means}
        square = {(len(c), *(len(row) for row in c)) for c in self.covariances}
        if shapes != {d} or square != {(d,) * (d + 1)} or len(self.means) != n:
            msg = (
                "means and covariances must have one entry per weight and one size; "
                f"got {n} weights, means of sizes {sorted(shapes)}"
            )
            raise ValueError(msg)
        if len(self.covariances) != n or not np.isclose(sum(self.weights), 1.0):
            msg = f"one covariance per weight and weights of sum 1; got {self.weights}"
            raise ValueError(msg)
        for matrix in self.covariances:
            try:
                np.linalg.cholesky(np.array(matrix))
            except np.linalg.LinAlgError:
                msg = f"covariances must be positive definite; got {matrix}"
                raise ValueError(msg) from None
        return self

    @property
    def n_dimensions(self) -> int:
        """Dimensions D."""
        return len(self.means[0])

    def first(self, n: int) -> Mixture:
        """Return the density of the first n quantities alone."""
        return Mixture(
            weights=self.weights,
            means=tuple(mean[:n] for mean in self.means),
            covariances=tuple(
                tuple(row[:n] for row in matrix[:n]) for matrix in self.covariances
            ),
        )

    def log_density(self, values: FloatArray) -> FloatArray:
        """Return ln of the density for values of shape (D, N), as shape (N,)."""
        total = np.full(values.shape[1], -np.inf)
        for part in component_logs(
            values,
            np.array(self.weights),
            np.array(self.means),
            np.array(self.covariances),
        ):
            total = np.logaddexp(total, part)
        return total

    def distance(self, values: FloatArray) -> FloatArray:
        """Return the chi-square (x-m)^T C^-1 (x-m) to the first component, (N,)."""
        offset = values - np.array(self.means[0])[:, None]
        whitened = whitening(np.array(self.covariances[0])) @ offset
        result: FloatArray = np.einsum("dn,dn->n", whitened, whitened)
        return result


def whitening(covariance: FloatArray) -> FloatArray:
    """Return the inverse of the Cholesky factor of a covariance matrix."""
    result: FloatArray = np.linalg.inv(np.linalg.cholesky(covariance))
    return result


def component_logs(
    values: FloatArray, weights: FloatArray, means: FloatArray, covariances: FloatArray
) -> FloatArray:
    """Return ln(weight x density) of each component, shape (K, N)."""
    d = values.shape[0]
    result = np.empty((len(weights), values.shape[1]))
    for k, (weight, mean, covariance) in enumerate(
        zip(weights, means, covariances, strict=True)
    ):
        white = whitening(covariance)
        z = white @ (values - mean[:, None])
        constant = np.log(weight * np.prod(np.diag(white))) - 0.5 * d * np.log(
            2 * np.pi
        )
        result[k] = constant - 0.5 * np.einsum("dn,dn->n", z, z)
    return result


def fit_mixture(
    values: FloatArray, n_components: int, *, n_steps: int = 60, floor: float = 1e-3
) -> Mixture:
    """Fit a mixture by expectation-maximisation.

    Parameters
    ----------
    values : array, shape (D, N)
        Sample.
    n_components : int
        Components.
    n_steps : int
        Steps; the start (shells of equal distance from the mean) and the steps are
        fixed, so that equal samples give equal mixtures.
    floor : float
        Share of the sample's variances added to every component, so that none
        collapses on a point.

    Returns
    -------
    Mixture
        Its components are not ordered.

    Raises
    ------
    OptionError
        If the sample is too small for so many components.

    References
    ----------
    A. P. Dempster, N. M. Laird, D. B. Rubin, J. R. Stat. Soc. B 39 (1977) 1.
    """
    d, n = values.shape
    numbers = n_components * (d + 1) * (d + 2) // 2
    if n < LEAST_EVENTS_PER_NUMBER * numbers:
        msg = (
            f"at least {LEAST_EVENTS_PER_NUMBER * numbers} assignments are required for "
            f"{n_components} components in {d} quantities; got {n}; use more events or "
            "fewer components"
        )
        raise OptionError(msg)
    whole = np.atleast_2d(np.cov(values))
    added = floor * np.diag(np.diag(whole))
    z = whitening(whole + added) @ (values - values.mean(axis=1, keepdims=True))
    rank = np.argsort(np.argsort((z * z).sum(axis=0), kind="stable"))
    share = np.eye(n_components)[:, rank * n_components // n]
    for _ in range(n_steps if n_components > 1 else 1):
        counts = np.maximum(share.sum(axis=1), 1e-9)
        means = share @ values.T / counts[:, None]
        covariances = np.empty((n_components, d, d))
        for k in range(n_components):
            offset = values - means[k][:, None]
            covariances[k] = (share[k] * offset) @ offset.T / counts[k] + added
        weights = counts / counts.sum()
        logs = component_logs(values, weights, means, covariances)
        share = np.exp(logs - np.logaddexp.reduce(logs, axis=0))
    return Mixture(
        weights=tuple(weights.tolist()),
        means=tuple(map(tuple, means.tolist())),
        covariances=tuple(tuple(map(tuple, c)) for c in covariances.tolist()),
    )
