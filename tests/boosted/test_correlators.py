from __future__ import annotations

import itertools

import fastjet
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.boosted.contributed import clustering
from tests.boosted.toys import narrow_jets, prongs, wide_jet
from toprecon.boosted import energy_correlators
from toprecon.kinematics import angle


def by_loops(p4, beta):
    """The definition of arXiv:1305.0007, eq. 2.1, written out."""
    z = p4[0] / p4[0].sum()
    n = len(z)
    theta = angle(p4[:, :, None], p4[:, None, :]) ** beta
    e2 = sum(z[i] * z[j] * theta[i, j] for i, j in itertools.combinations(range(n), 2))
    e3 = sum(
        z[i] * z[j] * z[k] * theta[i, j] * theta[i, k] * theta[j, k]
        for i, j, k in itertools.combinations(range(n), 3)
    )
    return e2, e3


def test_three_equal_particles_at_right_angles_by_hand():
    # z = 1/3, theta = pi/2: e2 = 3/9 * pi/2, e3 = 1/27 * (pi/2)^3
    c = energy_correlators(prongs([10.0] * 3, np.eye(3)), [3])
    assert c.e2[0] == pytest.approx(np.pi / 6)
    assert c.e3[0] == pytest.approx((np.pi / 2) ** 3 / 27)
    assert c.c2[0] == pytest.approx(c.e3[0] / c.e2[0] ** 2)
    assert c.d2[0] == pytest.approx(c.e3[0] / c.e2[0] ** 3)


@pytest.mark.parametrize("beta", [0.5, 1.0, 2.0])
def test_products_of_matrices_equal_the_loops_of_the_definition(rng, beta):
    counts = [1, 2, 3, 7, 12]
    jets = [wide_jet(rng, n) for n in counts]
    c = energy_correlators(np.concatenate(jets, axis=1), counts, beta=beta)
    for i, jet in enumerate(jets):
        e2, e3 = by_loops(jet, beta)
        assert c.e2[i] == pytest.approx(e2, rel=1e-7)
        assert c.e3[i] == pytest.approx(e3, rel=1e-7)


@pytest.mark.parametrize("beta", [1.0, 2.0])
def test_narrow_jets_agree_with_the_contributed_correlators(rng, beta):
    counts = rng.integers(4, 40, size=50)
    p4 = narrow_jets(rng, counts)
    reference = clustering(p4, counts, fastjet.cambridge_algorithm)

    def contributed(**kwargs):
        values = reference.exclusive_jets_energy_correlator(
            njets=1, beta=beta, normalized=True, **kwargs
        )
        return np.asarray(values)

    ours = energy_correlators(p4, counts, beta=beta)
    e3 = contributed(func="generalized", npoint=3, angles=-1)
    np.testing.assert_allclose(
        ours.e2, contributed(func="generalized", npoint=2, angles=-1), rtol=1e-5
    )
    np.testing.assert_allclose(ours.e3, e3, rtol=1e-5)
    np.testing.assert_allclose(ours.c2, contributed(func="c2"), rtol=1e-5)
    if beta == 1.0:  # the contributed generalised D2 has equal exponents for alpha = 1
        d2 = contributed(func="GeneralizedD2", alpha=1)
        np.testing.assert_allclose(ours.d2, d2, rtol=1e-5)


@given(st.integers(0, 2**32 - 1), st.floats(0.01, 100.0))
def test_ratios_do_not_change_if_all_energies_are_scaled(seed, factor):
    p4 = wide_jet(np.random.default_rng(seed), 9)
    one, other = energy_correlators(p4, [9]), energy_correlators(p4 * factor, [9])
    assert other.c2[0] == pytest.approx(one.c2[0], rel=1e-9)
    assert other.d2[0] == pytest.approx(one.d2[0], rel=1e-9)


@given(st.integers(0, 2**32 - 1))
def test_soft_particles_and_collinear_splittings_do_not_matter(seed):
    rng = np.random.default_rng(seed)
    p4 = wide_jet(rng, 9)
    before = energy_correlators(p4, [9])
    soft = np.concatenate([p4, prongs([1e-9], rng.normal(size=(1, 3)))], axis=1)
    split = np.concatenate([p4[:, :8], 0.4 * p4[:, 8:], 0.6 * p4[:, 8:]], axis=1)
    for other in (energy_correlators(soft, [10]), energy_correlators(split, [10])):
        # 1e-7: 1 - cos from a product of unit vectors gives angles to 1e-8 rad
        assert other.e2[0] == pytest.approx(before.e2[0], rel=1e-7)
        assert other.e3[0] == pytest.approx(before.e3[0], rel=1e-7)


def test_one_particle_has_no_ratio_and_no_particle_has_nothing():
    c = energy_correlators(prongs([5.0], [[0, 0, 1]]), [0, 1])
    assert c.e2[1] == 0.0
    assert np.isnan(c.c2).all()
    assert np.isnan(c.e2[0])


def test_two_prongs_have_small_d2_and_isotropic_jets_a_large_one(rng):
    two = prongs([50, 50, 0.5], [[0.3, 0, 1], [-0.3, 0, 1], [0.31, 0.01, 1]])
    many = wide_jet(rng, 40)
    c = energy_correlators(np.concatenate([two, many], axis=1), [3, 40])
    assert c.d2[0] < 0.1 < c.d2[1]
