"""Radiation of photons by the beams."""

from __future__ import annotations

import numpy as np
import pytest

from toprecon.treelevel.radiation import (
    largest_radiation_weight,
    mean_kept_fraction,
    radiation_exponent,
    radiation_weight,
    structure_function,
)


def test_exponent():
    # evaluated independently, alpha = 1/137.036
    for sqrt_s, expected in ((250, 0.11708), (500, 0.12352), (3000, 0.14016)):
        assert radiation_exponent(sqrt_s) == pytest.approx(expected, abs=1e-5)


@pytest.mark.parametrize(
    ("sqrt_s", "norm", "mean", "soft"),
    [(250, 0.99997, 0.96177, 0.795), (500, 0.99997, 0.95971, 0.785)],
)
def test_structure_function_has_the_moments_of_leading_logarithms(
    sqrt_s, norm, mean, soft
):
    # evaluated independently; exact in leading logarithms: <x> = exp(-beta/3)
    exponent = radiation_exponent(sqrt_s)
    u, weight = np.polynomial.legendre.leggauss(4000)
    loss = ((u + 1) / 2) ** (2 / exponent)
    density = weight / 2 * radiation_weight(loss, exponent)
    assert density.sum() == pytest.approx(norm, abs=3e-5)
    assert (density * (1 - loss)).sum() == pytest.approx(mean, abs=3e-5)
    assert mean_kept_fraction(exponent) == pytest.approx(mean, abs=1e-4)
    assert density[loss < 0.01].sum() == pytest.approx(soft, abs=1e-3)


def test_weight_never_exceeds_its_limit():
    exponent = radiation_exponent(500)
    loss = np.concatenate([[0.0], np.logspace(-300, 0, 4001)[:-1], [1 - 1e-12]])
    weight = radiation_weight(loss, exponent)
    assert np.all(np.isfinite(weight))
    assert weight.max() <= largest_radiation_weight(exponent)
    assert weight.min() > 0


def test_density_of_a_typical_loss():
    # E. A. Kuraev, V. S. Fadin, Sov. J. Nucl. Phys. 41 (1985) 466: in first order
    # (beta/4) (1 + x^2)/(1 - x) for a hard photon
    exponent = 1e-6
    value = float(structure_function(0.3, exponent))
    assert value == pytest.approx(exponent / 4 * (1 + 0.7**2) / 0.3, rel=1e-5)
