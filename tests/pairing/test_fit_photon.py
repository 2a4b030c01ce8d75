from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from toprecon.pairing.fit_photon import photon_pull, radiator_exponent


def test_the_exponent_is_that_of_the_leading_logarithm():
    # b = 2 alpha/pi (ln(s/m_e^2) - 1), Kuraev and Fadin 1985; from memory 0.1235
    assert radiator_exponent(500.0) == pytest.approx(0.1235, abs=1e-4)


def test_photons_of_the_spectrum_are_normally_distributed_in_the_pull(rng):
    b = float(radiator_exponent(500.0))
    # integrated spectrum (k/k_max)^b, Beckmann, List, List 2010
    k = 250.0 * rng.uniform(size=5000) ** (1 / b)
    k = np.maximum(k, 1e-30)
    eta, _ = photon_pull(k, np.full(5000, 250.0), np.full(5000, b))
    # probability of failing by chance: 1e-3
    assert stats.kstest(eta, stats.halfnorm.cdf).pvalue > 1e-3


def test_half_of_the_photons_are_softer_than_a_two_hundred_and_fiftieth():
    eta, _ = photon_pull(
        np.array([1.0]), np.array([250.0]), radiator_exponent(np.array([500.0]))
    )
    probability = 2 * stats.norm.cdf(eta[0]) - 1
    assert probability == pytest.approx((1 / 250) ** 0.1235, abs=1e-3)


def test_the_slope_is_the_derivative():
    k = np.array([0.01, 1.0, 30.0, 200.0])
    limit, b = np.full(4, 250.0), np.full(4, 0.1235)
    step = 1e-5 * k
    up, _ = photon_pull(k + step, limit, b)
    down, _ = photon_pull(k - step, limit, b)
    _, slope = photon_pull(k, limit, b)
    # second-order difference with a relative step of 1e-5
    np.testing.assert_allclose(slope, (up - down) / (2 * step), rtol=1e-7)


def test_a_photon_above_the_beam_energy_stays_finite():
    eta, slope = photon_pull(np.array([300.0]), np.array([250.0]), np.array([0.12]))
    assert np.isfinite(eta).all()
    assert np.isfinite(slope).all()
