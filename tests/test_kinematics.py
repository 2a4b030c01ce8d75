"""Lorentz arithmetic against its own laws and against the vector package."""

from __future__ import annotations

import math

import numpy as np
import pytest
import vector
from hypothesis import given
from hypothesis import strategies as st

from toprecon import kinematics as k

component = st.floats(-1e3, 1e3)


@st.composite
def momenta(draw, lightest=0.0):
    """Return a momentum with a mass, shape (4,)."""
    px, py, pz = draw(component), draw(component), draw(component)
    m = draw(st.floats(lightest, 1e3))
    return np.array([math.sqrt(px**2 + py**2 + pz**2 + m**2), px, py, pz])


@st.composite
def velocities(draw):
    """Return a velocity below 0.99, shape (3,)."""
    size = draw(st.floats(0, 0.99))
    cos, phi = draw(st.floats(-1, 1)), draw(st.floats(-math.pi, math.pi))
    sin = math.sqrt(1 - cos**2)
    return size * np.array([sin * math.cos(phi), sin * math.sin(phi), cos])


@given(momenta(), velocities())
def test_boost_and_its_inverse_give_the_momentum_back(p, v):
    # gamma^2 = 50 at most, twice: some thousand roundings
    assert np.allclose(k.boost(k.boost(p, v), -v), p, rtol=0, atol=1e-11 * p[0] + 1e-12)


@given(momenta(), momenta(), velocities())
def test_products_are_invariant_under_boosts(p, q, v):
    before = k.minkowski(p, q)
    after = k.minkowski(k.boost(p, v), k.boost(q, v))
    # the terms of the sum cancel: the error is that of gamma^2 E E'
    assert after == pytest.approx(before, abs=1e-11 * p[0] * q[0] + 1e-12)


@given(momenta(lightest=1.0))
def test_at_rest_in_its_own_frame(p):
    rest = k.to_rest_frame(p, p)
    scale = p[0] ** 2 / float(k.mass(p))
    assert rest[0] == pytest.approx(float(k.mass(p)), abs=1e-12 * scale)
    assert np.allclose(rest[1:], 0, atol=1e-12 * scale)


@given(momenta(), momenta(lightest=10.0))
def test_to_and_from_the_rest_frame_are_inverse(p, system):
    again = k.from_rest_frame(k.to_rest_frame(p, system), system)
    gamma = system[0] / float(k.mass(system))
    assert np.allclose(again, p, rtol=0, atol=1e-13 * gamma**2 * p[0] + 1e-12)


@given(momenta(), velocities())
def test_boost_agrees_with_the_vector_package(p, v):
    other = vector.obj(E=p[0], px=p[1], py=p[2], pz=p[3]).boost_beta3(
        vector.obj(x=v[0], y=v[1], z=v[2])
    )
    expected = np.array([other.E, other.px, other.py, other.pz])
    assert np.allclose(k.boost(p, v), expected, rtol=0, atol=1e-11 * p[0] + 1e-12)


@given(momenta(lightest=1e-3))
def test_quantities_agree_with_the_vector_package(p):
    other = vector.obj(E=p[0], px=p[1], py=p[2], pz=p[3])
    # both form E^2 - p^2, which cancels for light particles
    assert k.mass(p) ** 2 == pytest.approx(other.mass2, abs=1e-9 * p[0] ** 2 + 1e-12)
    assert k.transverse_momentum(p) == pytest.approx(other.pt)
    if k.momentum(p) > 0:
        assert k.cos_theta(p) == pytest.approx(other.costheta)


@given(momenta(), momenta(), st.floats(-math.pi, math.pi))
def test_angles_do_not_change_under_rotation(p, q, phi):
    def turned(x):
        c, s = math.cos(phi), math.sin(phi)
        return np.array([x[0], c * x[1] - s * x[2], s * x[1] + c * x[2], x[3]])

    before, after = k.angle(p, q), k.angle(turned(p), turned(q))
    assert np.isnan(before) == np.isnan(after)
    if not np.isnan(before) and min(k.momentum(p), k.momentum(q)) > 1e-6:
        assert after == pytest.approx(before, abs=1e-9)


def test_angle_keeps_its_precision_for_parallel_momenta():
    p = np.array([1.0, 0.0, 0.0, 1.0])
    q = np.array([1.0, 1e-9, 0.0, 1.0])
    assert k.angle(p, q) == pytest.approx(1e-9, rel=1e-12)
    assert k.angle(p, p) == 0
    assert k.angle(p, p * [1, -1, -1, -1]) == pytest.approx(math.pi)


def test_direction_of_a_momentum_at_rest_is_missing():
    rest = np.array([5.0, 0.0, 0.0, 0.0])
    moving = np.array([5.0, 0.0, 0.0, -3.0])
    assert np.isnan(k.cos_theta(rest))
    assert np.isnan(k.angle(rest, moving))
    assert k.cos_theta(moving) == -1


def test_missing_stays_missing():
    nothing = np.full((4, 2), np.nan)
    assert np.isnan(k.cos_theta(nothing)).all()
    assert np.isnan(k.angle(nothing, nothing)).all()
    assert np.isnan(k.boost(nothing, np.zeros((3, 2)))).all()


def test_velocity_of_light_has_no_frame():
    p = np.array([5.0, 0.0, 0.0, 3.0])
    assert np.isnan(k.boost(p, [0, 0, 1.0])).all()
    assert np.isnan(k.boost(p, [0, 0.8, 0.8])).all()


def test_negative_mass_squared_gives_no_mass():
    assert k.mass([1.0, 0, 0, 1.0000001]) == 0


def test_boost_by_hand():
    # gamma = 1.25 for velocity 0.6: a mass of 4 moves with E = 5, p = 3
    assert np.allclose(k.boost([4.0, 0, 0, 0], [0, 0, 0.6]), [5, 0, 0, 3])
    assert np.allclose(k.velocity([5.0, 0, 0, 3]), [0, 0, 0.6])


def test_decay_momentum_by_hand():
    # t -> b W with a massless b: (M^2 - m^2) / 2M
    assert k.decay_momentum(173.0, 80.4, 0.0) == pytest.approx(
        (173.0**2 - 80.4**2) / (2 * 173.0)
    )
    assert k.decay_momentum(10.0, 6.0, 5.0) == 0  # closed
    assert k.decay_momentum(10.0, 5.0, 5.0) == 0  # at the threshold


@given(st.floats(0.1, 1e3), st.floats(-4, 4), st.floats(-3, 3), st.floats(0, 200))
def test_pt_eta_phi_mass_agree_with_the_vector_package(pt, eta, phi, m):
    other = vector.obj(pt=pt, eta=eta, phi=phi, mass=m)
    expected = [other.E, other.px, other.py, other.pz]
    assert np.allclose(k.from_pt_eta_phi_mass(pt, eta, phi, m), expected, rtol=1e-12)


@pytest.mark.parametrize("n", [0, 1, 3])
def test_any_number_of_momenta(n):
    p = np.ones((4, n)) * np.array([5.0, 1, 2, 3])[:, None]
    assert k.mass(p).shape == (n,)
    assert k.cos_theta(p).shape == (n,)
    assert k.boost(p, np.zeros((3, n))).shape == (4, n)
    assert k.angle(p, p).shape == (n,)
