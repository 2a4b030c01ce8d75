from __future__ import annotations

import numpy as np

from toprecon.jets import relative_isolation


def particle(energy, theta):
    return [energy, energy * np.sin(theta), 0.0, energy * np.cos(theta)]


def test_only_energy_within_the_cone_and_the_event_counts():
    p = np.array(
        [particle(20, 0.0), particle(5, 0.29), particle(7, 0.31),  # first event
         particle(10, 0.0), particle(3, 0.1)]  # second event
    ).T  # fmt: skip
    chosen = np.array([True, False, True, True, False])
    share = relative_isolation(p, [3, 2], chosen, cone=0.3)
    assert np.allclose(share, [0.25, np.nan, 5 / 7, 0.3, np.nan], equal_nan=True)


def test_a_particle_alone_is_isolated_and_nothing_gives_nothing():
    p = np.array([particle(20, 1.0)]).T
    assert relative_isolation(p, [1], np.array([True]), cone=0.5).tolist() == [0.0]
    none = relative_isolation(np.zeros((4, 0)), [0, 0], np.zeros(0, bool), cone=0.5)
    assert none.shape == (0,)


def test_a_particle_at_rest_is_in_no_cone():
    p = np.array([particle(20, 0.0), [1.0, 0.0, 0.0, 0.0]]).T
    share = relative_isolation(p, [2], np.array([True, False]), cone=3.0)
    assert share[0] == 0.0
