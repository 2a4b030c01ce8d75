"""Gaussian mixtures against SciPy and against samples of known densities."""

from __future__ import annotations

import numpy as np
import pytest

from tests.require import require
from toprecon.errors import OptionError
from toprecon.pairing.densities import Mixture, fit_mixture

TWO = Mixture(
    weights=(0.3, 0.7),
    means=((0.0, 1.0), (4.0, -2.0)),
    covariances=(((1.0, 0.4), (0.4, 2.0)), ((0.5, 0.0), (0.0, 0.5))),
)


def drawn(mixture, n, rng):
    """Values (D, N) of a mixture."""
    part = rng.choice(len(mixture.weights), size=n, p=mixture.weights)
    values = np.empty((mixture.n_dimensions, n))
    for k in range(len(mixture.weights)):
        which = part == k
        values[:, which] = rng.multivariate_normal(
            mixture.means[k], mixture.covariances[k], size=which.sum()
        ).T
    return values


def test_density_is_that_of_scipy(rng):
    normal = require("scipy.stats").multivariate_normal
    values = rng.normal(scale=3, size=(2, 50))
    expected = sum(
        w * normal(m, c).pdf(values.T)
        for w, m, c in zip(TWO.weights, TWO.means, TWO.covariances, strict=True)
    )
    # pure arithmetic
    assert np.allclose(TWO.log_density(values), np.log(expected), rtol=1e-10)


def test_the_first_quantities_have_the_marginal_density(rng):
    normal = require("scipy.stats").norm
    values = rng.normal(scale=3, size=(1, 20))
    expected = 0.3 * normal(0, 1).pdf(values) + 0.7 * normal(4, np.sqrt(0.5)).pdf(
        values
    )
    assert np.allclose(np.exp(TWO.first(1).log_density(values)), expected[0])


def test_distance_is_the_chi_square_with_covariance():
    offset = np.array([1.0, 2.0])
    expected = offset @ np.linalg.inv(np.array(TWO.covariances[0])) @ offset
    values = (np.array(TWO.means[0]) + offset)[:, None]
    assert TWO.distance(values) == pytest.approx([expected])


def test_a_fit_finds_the_mixture_again(rng):
    values = drawn(TWO, 20_000, rng)
    found = fit_mixture(values, 2)
    order = np.argsort([mean[0] for mean in found.means])
    # 20 000 values: errors of means 0.013 and of weights 0.0033; the bounds are above 5
    assert np.allclose(np.array(found.weights)[order], TWO.weights, atol=0.02)
    assert np.allclose(np.array(found.means)[order], TWO.means, atol=0.09)
    assert np.allclose(np.array(found.covariances)[order], TWO.covariances, atol=0.2)


def test_equal_samples_give_equal_mixtures(rng):
    values = drawn(TWO, 500, rng)
    assert fit_mixture(values, 3) == fit_mixture(values.copy(), 3)


def test_too_small_a_sample_is_refused(rng):
    with pytest.raises(OptionError, match=r"at least 24 assignments .* got 23; use"):
        fit_mixture(rng.normal(size=(2, 23)), 2)


@pytest.mark.parametrize(
    ("fields", "message"),
    [
        ({"means": ((0.0,), (0.0, 1.0))}, "one entry per weight and one size"),
        ({"covariances": (((1.0, 0.0),),)}, "one entry per weight and one size"),
        ({"weights": (0.9,)}, "weights of sum 1"),
        ({"covariances": (((-1.0,),),)}, "must be positive definite"),
    ],
)
def test_numbers_that_do_not_fit_are_refused(fields, message):
    with pytest.raises(OptionError, match=message):
        Mixture(**fields)
