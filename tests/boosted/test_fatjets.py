from __future__ import annotations

import numpy as np
import pytest

from tests.boosted.toys import make_toy_events, prongs, toy_pair
from toprecon.boosted import BoostedOptions, FatJetAlgorithm
from toprecon.boosted.fatjets import find_fat_jets, read_particles
from toprecon.errors import MissingFieldError

TWO_SIDES = prongs(
    [300.0, 200.0, 250.0, 150.0],
    [[0, 0, 1], [0.3, 0, 1], [0, 0, -1], [0, 0.4, -1]],
)


def find(events, **settings):
    particles = read_particles(events)
    return find_fat_jets(
        particles, np.asarray(events.sqrt_s), BoostedOptions(**settings)
    )


@pytest.mark.parametrize("algorithm", list(FatJetAlgorithm))
def test_two_back_to_back_jets_are_found_by_every_algorithm(algorithm):
    fat_jets = find(make_toy_events([TWO_SIDES]), algorithm=algorithm)
    assert fat_jets.fat_index.tolist() == [0, 0, 1, 1]
    np.testing.assert_allclose(fat_jets.p4[:, 0, 0], TWO_SIDES[:, :2].sum(axis=1))
    np.testing.assert_allclose(fat_jets.p4[:, 0, 1], TWO_SIDES[:, 2:].sum(axis=1))


def test_radiation_at_large_angles_stays_outside_inclusive_jets():
    p4 = np.concatenate([TWO_SIDES, prongs([20.0], [[1, 0, 0]])], axis=1)
    inclusive = find(make_toy_events([p4]), algorithm="inclusive", power=-1, radius=0.8)
    assert inclusive.fat_index.tolist() == [0, 0, 1, 1, -1]
    exclusive = find(make_toy_events([p4]), algorithm="durham")
    assert -1 not in exclusive.fat_index.tolist()


def test_the_radius_can_scale_with_the_energy():
    # opening angles are 0.29 and 0.38 rad; R = 1.0 * 350/1400 = 0.25 splits both
    settings = {"algorithm": "inclusive", "power": -1, "radius": 1.0}
    events = make_toy_events([TWO_SIDES])
    assert find(events, **settings).fat_index.tolist() == [0, 0, 1, 1]
    scaled = find(events, reference_energy=350.0, **settings)
    assert scaled.fat_index.tolist() == [0, -1, 1, -1]


def thrust_sum(p4, side):
    """|sum_i s_i p_i| of a division into sides; its maximum is thrust x sum |p|."""
    return np.linalg.norm(p4[1:] @ np.where(side == 0, 1.0, -1.0))


def test_hemispheres_are_divided_by_the_plane_across_their_axis(rng):
    for _ in range(20):
        p4 = prongs(rng.exponential(10, size=12), rng.normal(size=(12, 3)))
        events = make_toy_events([p4])
        side = find(events, algorithm="hemispheres", least_energy=0).fat_index
        axis = p4[1:] @ np.where(side == 0, 1.0, -1.0)
        np.testing.assert_array_equal(axis @ p4[1:] >= 0, side == 0)
        start = find(events, algorithm="durham", least_energy=0).fat_index
        assert thrust_sum(p4, side) >= thrust_sum(p4, start) - 1e-9


def test_hemispheres_of_two_jets_have_the_largest_thrust_of_all_divisions(rng):
    # Farhi, Phys. Rev. Lett. 39 (1977) 1587; all 2^9 divisions are tried
    directions = rng.normal(size=(10, 3)) * 0.3
    directions[:, 2] += np.where(np.arange(10) % 2, 1.0, -1.0)
    p4 = prongs(rng.exponential(10, size=10), directions)
    side = find(
        make_toy_events([p4]), algorithm="hemispheres", least_energy=0
    ).fat_index
    best = max(thrust_sum(p4, (code >> np.arange(10)) & 1) for code in range(512))
    assert thrust_sum(p4, side) == pytest.approx(best)


def test_an_event_that_cannot_give_two_jets_has_none():
    one = prongs([100.0], [[0, 0, 1]])
    empty = np.zeros((4, 0))
    weak = prongs([100.0, 2.0], [[0, 0, 1], [0, 0, -1]])
    events = make_toy_events([one, empty, weak, TWO_SIDES])
    fat_jets = find(events, least_energy=10.0)
    assert fat_jets.found.tolist() == [False, False, False, True]
    assert np.isnan(fat_jets.p4[:, :3]).all()
    assert fat_jets.fat_index[:3].tolist() == [-1, -1, -1]


def test_events_without_particles_are_refused_with_a_remedy():
    events = make_toy_events([toy_pair()[0]])
    without = events[[name for name in events.fields if name != "particles"]]
    with pytest.raises(MissingFieldError, match="'particles' is required by the boos"):
        read_particles(without)
