"""Decay of the top at leading order."""

from __future__ import annotations

import numpy as np
import pytest

from toprecon.treelevel import (
    analysing_power,
    b_momentum,
    helicity_angle_density,
    largest_lepton_b_mass,
    mean_lepton_energy,
    top_width,
    w_helicity_fractions,
    width_correction,
)


def test_helicity_fractions_at_leading_order():
    fractions = w_helicity_fractions(172.5, 80.379)
    assert fractions == pytest.approx((0.6972, 0.3028, 0.0), abs=1e-4)
    # with the b mass, near the full result of Czarnecki, Korner, Piclum,
    # arXiv:1005.2625: 0.687(5), 0.311(5), 0.0017(1)
    massive = w_helicity_fractions(172.5, 80.379, 4.78)
    assert sum(massive) == pytest.approx(1.0, abs=1e-14)
    assert massive == pytest.approx((0.687, 0.311, 0.0017), abs=0.012)
    assert 0 < massive.right < 0.001


def test_helicity_angle_has_the_moments_of_the_fractions():
    c = np.linspace(-1, 1, 20001)
    density = helicity_angle_density(c)
    # evaluated independently: <c> = -0.1514, <c^2> = 0.2606
    assert np.trapezoid(density, c) == pytest.approx(1.0, abs=1e-6)
    assert np.trapezoid(density * c, c) == pytest.approx(-0.1514, abs=1e-4)
    assert np.trapezoid(density * c**2, c) == pytest.approx(0.2606, abs=1e-4)


def test_analysing_powers():
    assert analysing_power("lepton") == 1.0
    assert analysing_power("w", 172.5, 80.379) == pytest.approx(0.3945, abs=1e-4)
    assert analysing_power("b", 172.5, 80.379) == pytest.approx(-0.3945, abs=1e-4)
    # A. Brandenburg, Z. G. Si, P. Uwer, hep-ph/0205023, from memory: -0.41 for the b,
    # -0.31 for the neutrino with the masses of the time
    assert analysing_power("neutrino", 175.0, 80.4) == pytest.approx(-0.31, abs=0.06)


def test_analysing_power_of_the_neutrino_follows_from_the_matrix_element():
    # |M|^2 ~ (t.l)(b.nu) with the spin along the lepton: <cos(l, nu)> from the decay
    y = (80.379 / 172.5) ** 2
    c, weight = np.polynomial.legendre.leggauss(60)
    e_l = (1 + y + (1 - y) * c) / 4  # in units of m_t, W angle c
    e_n = (1 + y - (1 - y) * c) / 4
    cos_ln = 1 - y / (2 * e_l * e_n)
    density = e_l * (1 - 2 * e_l) * weight
    assert analysing_power("neutrino") == pytest.approx(
        float((density * cos_ln).sum() / density.sum()), abs=1e-12
    )


def test_width_at_leading_and_next_order():
    assert top_width(172.5, 80.379) == pytest.approx(1.4807, abs=1e-4)
    # Jezabek and Kuhn, Nucl. Phys. B314 (1989) 1; factors from memory
    y = (80.379 / 172.5) ** 2
    assert width_correction(y, 0.108) == pytest.approx(0.9139, abs=1e-4)
    assert width_correction(0.0, 0.108) == pytest.approx(0.9065, abs=1e-4)
    assert width_correction(1e-6, 0.108) == pytest.approx(
        width_correction(0.0, 0.108), abs=1e-4
    )
    assert width_correction(y, 0.0) == 1.0
    # L. Chen et al., arXiv:2309.01937: 1.3148 GeV at third order, m_t = 172.69
    assert top_width(172.69, 80.379, alpha_strong=0.108) == pytest.approx(
        1.3148, rel=0.04
    )


def test_two_body_kinematics():
    # evaluated independently
    assert b_momentum(172.5, 80.379) == pytest.approx(67.523, abs=1e-3)
    assert b_momentum(172.5, 80.379, 4.78) == pytest.approx(67.420, abs=1e-3)
    assert mean_lepton_energy(172.5, 80.379) == pytest.approx(47.377, abs=1e-3)
    assert largest_lepton_b_mass(172.5, 80.379) == pytest.approx(152.629, abs=1e-3)


def test_unknown_product_names_the_nearest():
    with pytest.raises(ValueError, match="did you mean 'lepton'"):
        analysing_power("leptom")
