from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.jets.conftest import random_particles
from toprecon.errors import OptionError
from toprecon.jets import (
    Sequence,
    cluster_history,
    durham_distance,
    one_minus_cosine,
)

# three particles worked out by hand and with the FastJet library
THREE = np.array(
    [
        [50.0, 30.0, 0.0, 40.0],
        [20.0, 0.0, 20.0, 0.0],
        [np.sqrt(2900.0), -30.0, -20.0, -40.0],
    ]
).T


def test_durham_distances_of_three_particles():
    # d_01 = 2 * 20^2 * (1 - 0) = 800; the others by the same formula,
    # Catani et al., Phys. Lett. B 269 (1991) 432
    pairs = durham_distance(THREE[:, [0, 1, 0]], THREE[:, [1, 2, 2]])
    np.testing.assert_allclose(pairs, [800.0, 1097.1125, 9642.3835], atol=1e-4)


def test_the_pair_with_the_least_distance_merges_first():
    history = cluster_history(THREE, [3])
    assert history.left.tolist()[3:] == [0, 3]
    assert history.right.tolist()[3:] == [1, 2]
    assert history.parent.tolist() == [3, 3, 4, 4, 4]
    assert history.merging_scale(2)[0] == pytest.approx(800.0)
    total = THREE[0].sum()
    assert history.merging_scale(2)[0] / total**2 == pytest.approx(0.0521539, abs=1e-7)


@pytest.mark.parametrize("sequence", list(Sequence))
def test_every_node_is_the_sum_of_its_branches(particles, sequence):
    p4, counts = particles
    history = cluster_history(p4, counts, sequence)
    merged = np.flatnonzero(history.left >= 0)
    assert len(merged) == np.maximum(counts - 1, 0).sum()
    left, right = history.left[merged], history.right[merged]
    np.testing.assert_array_equal(
        history.p4[:, left] + history.p4[:, right], history.p4[:, merged]
    )
    np.testing.assert_array_equal(history.parent[left], merged)
    np.testing.assert_array_equal(history.parent[right], merged)
    np.testing.assert_array_equal(history.p4[:, history.leaves], p4)


def test_cambridge_merges_the_pair_of_least_angle_first(particles):
    p4, counts = particles
    history = cluster_history(p4, counts, Sequence.CAMBRIDGE)
    first = np.cumsum(counts) - counts
    for i in np.flatnonzero(counts >= 2):
        event = p4[:, first[i] : first[i] + counts[i]]
        distance = one_minus_cosine(event[:, :, None], event[:, None, :])
        distance[np.diag_indices(counts[i])] = np.inf
        node = history.offsets[i] + counts[i]
        pair = [history.left[node] - history.offsets[i]]
        pair.append(history.right[node] - history.offsets[i])
        assert distance[tuple(pair)] == pytest.approx(distance.min(), rel=1e-9)


def test_split_gives_one_jet_per_particle_if_there_are_few(particles):
    p4, counts = particles
    jet_index, jets, nodes = cluster_history(p4, counts).split(3)
    assert (nodes[0] == -1).all()
    assert (nodes[1] >= 0).tolist() == [True, False, False]
    assert (nodes[2] >= 0).sum() == 2
    assert jets[0, 0].tolist() == [0.0, 0.0, 0.0]
    assert set(jet_index[:1]) == {0}


@given(st.integers(0, 2**32 - 1), st.integers(1, 6))
def test_split_shares_out_all_particles(seed, n):
    rng = np.random.default_rng(seed)
    counts = rng.integers(1, 12, size=5)
    p4 = random_particles(rng, counts)
    jet_index, jets, _ = cluster_history(p4, counts).split(n)
    event = np.repeat(np.arange(5), counts)
    for i in range(5):
        for k in range(min(n, counts[i])):
            members = (event == i) & (jet_index == k)
            np.testing.assert_allclose(
                p4[:, members].sum(axis=1), jets[:, i, k], rtol=1e-9, atol=1e-9
            )
        assert np.all(np.diff(jets[0, i, : counts[i]]) <= 0)


def test_small_angles_keep_their_precision():
    # 1 - cos = theta^2/2 for theta = 1e-7, lost entirely in double precision cosines
    p = np.array([1.0, 0.0, 0.0, 1.0])
    q = np.array([1.0, 1e-7, 0.0, 1.0])
    assert one_minus_cosine(p, q) == pytest.approx(0.5e-14, rel=1e-6)


def test_an_unknown_sequence_is_refused():
    with pytest.raises(OptionError, match="sequence: must be one of durham, camb"):
        cluster_history(THREE, [3], "kt")
