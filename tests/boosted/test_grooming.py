from __future__ import annotations

import fastjet
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.boosted.contributed import clustering
from tests.boosted.toys import narrow_jets, prongs, wide_jet
from toprecon.boosted import soft_drop
from toprecon.jets import Sequence, cluster_history
from toprecon.kinematics import mass


def groom(p4, counts=None, **settings):
    counts = [p4.shape[1]] if counts is None else counts
    return soft_drop(cluster_history(p4, counts, Sequence.CAMBRIDGE), **settings)


def test_a_soft_wide_particle_is_dropped_and_a_hard_one_is_kept():
    # 60 + 35 close together and 5 at a right angle: 5/100 fails z_cut = 0.1,
    # 35/95 passes
    p4 = prongs([60.0, 35.0, 5.0], [[0, 0, 1], [0.1, 0, 1], [1, 0, 0]])
    groomed = groom(p4, z_cut=0.1, beta=0.0)
    assert groomed.kept.tolist() == [True, True, False]
    assert groomed.z[0] == pytest.approx(35 / 95)
    assert groomed.theta[0] == pytest.approx(np.arctan(0.1))
    assert groomed.p4[0, 0] == pytest.approx(95.0)


def test_beta_lets_narrow_soft_branches_pass():
    # z = 0.05 at theta: passes z_cut (sqrt(2) sin(theta/2))^2 = 0.1 * 0.1 only if narrow
    p4 = prongs([95.0, 5.0], [[0, 0, 1], [np.sqrt(0.1), 0, np.sqrt(0.9)]])
    opening = 1 - np.sqrt(0.9)  # 1 - cos(theta) = 2 sin^2(theta/2)
    threshold = 0.1 * opening
    assert threshold < 0.05
    assert groom(p4, z_cut=0.1, beta=2.0).kept.all()
    assert not groom(p4, z_cut=0.1, beta=0.0).kept.all()
    exact = 0.05 / opening
    assert groom(p4, z_cut=exact * 0.999, beta=2.0).kept.all()
    assert not groom(p4, z_cut=exact * 1.001, beta=2.0).kept.all()


@pytest.mark.parametrize("beta", [0.0, 1.0, 2.0])
def test_narrow_jets_are_groomed_like_the_contributed_soft_drop(rng, beta):
    # in a narrow jet at right angles to the beam, energies and opening angles are
    # transverse momenta and distances, so the contributed SoftDrop must agree
    counts = rng.integers(5, 40, size=60)
    p4 = narrow_jets(rng, counts)
    radius = 2e-3
    reference = clustering(
        p4, counts, fastjet.cambridge_algorithm
    ).exclusive_jets_softdrop_grooming(njets=1, beta=beta, symmetry_cut=0.1, R0=radius)
    ours = groom(p4, counts, z_cut=0.1, beta=beta, radius=radius)
    # 1e-5: corrections of the order of the squared opening angle, 1e-6
    np.testing.assert_allclose(ours.p4[0], np.asarray(reference.Esoftdrop), rtol=1e-5)
    np.testing.assert_allclose(
        ours.z, np.asarray(reference.symmetrysoftdrop), rtol=1e-5
    )
    np.testing.assert_allclose(
        ours.theta, np.asarray(reference.deltaRsoftdrop), rtol=1e-5
    )
    np.testing.assert_allclose(
        mass(ours.p4), np.asarray(reference.msoftdrop), rtol=1e-4
    )


def test_no_cut_keeps_everything(rng):
    counts = rng.integers(2, 30, size=20)
    p4 = np.concatenate([wide_jet(rng, n) for n in counts], axis=1)
    groomed = groom(p4, counts, z_cut=0.0)
    assert groomed.kept.all()


def test_the_kept_particles_add_up_to_the_groomed_jet(rng):
    counts = rng.integers(1, 40, size=50)
    p4 = np.concatenate([wide_jet(rng, n) for n in counts], axis=1)
    groomed = groom(p4, counts, z_cut=0.2, beta=0.5)
    owner = np.repeat(np.arange(50), counts)
    for i in range(4):
        total = np.bincount(owner, weights=p4[i] * groomed.kept, minlength=50)
        np.testing.assert_allclose(total, groomed.p4[i], atol=1e-9)


def test_jets_of_one_or_no_particle_have_no_splitting():
    groomed = groom(prongs([5.0], [[0, 0, 1]]), [0, 1])
    assert groomed.p4[0].tolist() == [0.0, 5.0]
    assert np.isnan(groomed.z).all()


@given(st.integers(0, 2**32 - 1), st.floats(0, 2))
def test_a_very_soft_particle_changes_the_groomed_jet_by_no_more_than_itself(
    seed, beta
):
    rng = np.random.default_rng(seed)
    p4 = wide_jet(rng, 12)
    soft = prongs([1e-9], rng.normal(size=(1, 3)))
    before = groom(p4, z_cut=0.1, beta=beta)
    after = groom(np.concatenate([p4, soft], axis=1), z_cut=0.1, beta=beta)
    np.testing.assert_allclose(after.p4, before.p4, atol=1e-8)


@given(st.integers(0, 2**32 - 1), st.floats(0.01, 0.99), st.floats(0, 2))
def test_a_collinear_splitting_leaves_the_groomed_jet_unchanged(seed, share, beta):
    rng = np.random.default_rng(seed)
    p4 = wide_jet(rng, 12)
    split = np.concatenate(
        [p4[:, :11], p4[:, 11:] * share, p4[:, 11:] * (1 - share)], 1
    )
    before = groom(p4, z_cut=0.1, beta=beta)
    after = groom(split, z_cut=0.1, beta=beta)
    np.testing.assert_allclose(after.p4, before.p4, rtol=1e-9, atol=1e-9)


@given(st.integers(0, 2**32 - 1))
def test_a_harder_cut_keeps_fewer_particles(seed):
    rng = np.random.default_rng(seed)
    p4 = wide_jet(rng, 20)
    loose = groom(p4, z_cut=0.05, beta=1.0).kept
    tight = groom(p4, z_cut=0.2, beta=1.0).kept
    assert not np.any(tight & ~loose)
