from __future__ import annotations

import math

import fastjet
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.boosted.contributed import clustering
from tests.boosted.toys import narrow_jets, prongs, wide_jet
from toprecon.boosted import SubjetAxes, n_subjettiness


def test_two_particles_by_hand():
    # equal energies, opening angle a: the axis is in the middle, tau_1 = (a/2)/R_0
    p4 = prongs([50.0, 50.0], [[math.sin(0.4), 0, math.cos(0.4)], [0, 0, 1]])
    assert n_subjettiness(p4, [2], 1, radius=1.0)[0] == pytest.approx(0.2)
    assert n_subjettiness(p4, [2], 1, radius=0.5)[0] == pytest.approx(0.4)
    assert n_subjettiness(p4, [2], 1, radius=1.0, beta=2)[0] == pytest.approx(0.04)


def test_tau_is_zero_for_at_most_n_directions(rng):
    directions = rng.normal(size=(3, 3))
    collinear = np.repeat(prongs([30.0, 20.0, 10.0], directions), 4, axis=1)
    for n, small in ((1, False), (2, False), (3, True), (4, True)):
        tau = n_subjettiness(collinear, [12], n)[0]
        # Thaler, Van Tilburg: tau_N = 0 if all radiation is along N directions
        assert (tau < 1e-12) == small
    assert n_subjettiness(collinear[:, :1], [1], 2).tolist() == [0.0]


@pytest.mark.parametrize("beta", [1.0, 2.0])
@pytest.mark.parametrize("n", [1, 2, 3, 4])
def test_narrow_jets_agree_with_the_contributed_definition(rng, n, beta):
    # at right angles to the beam energies and angles are transverse momenta and
    # distances, so the normalised measure of the contributed Nsubjettiness must agree
    counts = rng.integers(6, 40, size=40)
    p4 = narrow_jets(rng, counts)
    reference = clustering(p4, counts, fastjet.kt_algorithm).njettiness(
        measure_definition="NormalizedMeasure",
        axes_definition="KT_Axes",
        njets=[n],
        beta=beta,
        R0=1.0,
    )
    ours = n_subjettiness(p4, counts, n, beta=beta, radius=1.0)
    np.testing.assert_allclose(ours, np.asarray(reference).ravel(), rtol=1e-5)


@pytest.mark.parametrize("n", [1, 2, 3])
def test_minimised_axes_do_as_well_as_the_contributed_minimisation(rng, n):
    counts = rng.integers(6, 40, size=40)
    p4 = narrow_jets(rng, counts)
    reference = clustering(p4, counts, fastjet.kt_algorithm).njettiness(
        axes_definition="OnePass_KT_Axes", njets=[n], beta=1.0, R0=1.0
    )
    start = n_subjettiness(p4, counts, n, radius=1.0)
    ours = n_subjettiness(p4, counts, n, radius=1.0, axes=SubjetAxes.MINIMISED)
    assert np.all(ours <= start * (1 + 1e-12))
    assert np.mean(ours) <= 1.01 * np.mean(np.asarray(reference))


@given(st.integers(0, 2**32 - 1))
def test_more_axes_never_describe_a_jet_worse_after_minimisation(seed):
    p4 = wide_jet(np.random.default_rng(seed), 15)
    tau = [n_subjettiness(p4, [15], n, axes="minimised")[0] for n in (1, 2, 3, 4)]
    # local minima: not exactly ordered
    assert np.all(np.diff(tau) <= 0.05 * tau[0])


@given(st.integers(0, 2**32 - 1), st.integers(1, 4))
def test_soft_particles_and_collinear_splittings_do_not_matter(seed, n):
    rng = np.random.default_rng(seed)
    p4 = wide_jet(rng, 12)
    before = n_subjettiness(p4, [12], n)[0]
    soft = np.concatenate([p4, prongs([1e-10], rng.normal(size=(1, 3)))], axis=1)
    assert n_subjettiness(soft, [13], n)[0] == pytest.approx(before, rel=1e-8)
    split = np.concatenate([p4[:, :11], 0.3 * p4[:, 11:], 0.7 * p4[:, 11:]], axis=1)
    assert n_subjettiness(split, [13], n)[0] == pytest.approx(before, rel=1e-6)


@given(st.integers(0, 2**32 - 1), st.floats(0.01, 100.0))
def test_scaling_all_energies_changes_nothing(seed, factor):
    p4 = wide_jet(np.random.default_rng(seed), 10)
    for n in (1, 3):
        assert n_subjettiness(p4 * factor, [10], n)[0] == pytest.approx(
            n_subjettiness(p4, [10], n)[0], rel=1e-9
        )


def test_a_jet_without_particles_is_nan():
    tau = n_subjettiness(prongs([5.0], [[0, 0, 1]]), [1, 0], 1)
    assert tau[0] == 0.0
    assert np.isnan(tau[1])
