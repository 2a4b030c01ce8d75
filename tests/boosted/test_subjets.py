from __future__ import annotations

import numpy as np
import pytest

from tests.boosted.toys import prongs, three_prong_top
from toprecon.boosted import WChoice, splitting_scale, w_candidate
from toprecon.jets import cluster_history
from toprecon.kinematics import mass


def test_the_w_is_found_among_the_quarks_of_a_top():
    quarks = three_prong_top([0.2, 0.1, 1.0])
    assert mass(quarks.sum(axis=1)) == pytest.approx(172.5)
    for order in ([0, 1, 2], [2, 0, 1], [1, 2, 0]):
        found = w_candidate(quarks[:, None, order])
        assert found.mass[0] == pytest.approx(80.379)
        np.testing.assert_allclose(found.p4[:, 0], quarks[:, 1:].sum(axis=1))
        np.testing.assert_allclose(found.b_p4[:, 0], quarks[:, 0])


def test_choices_of_the_w_pair():
    subjets = prongs([100.0, 50.0, 40.0], [[1, 0, 5], [0, 1, 5], [0, 0.3, 5]])[
        :, None, :
    ]
    masses = [
        float(mass(subjets[:, 0, i] + subjets[:, 0, j]))
        for i, j in ((0, 1), (0, 2), (1, 2))
    ]
    smallest = w_candidate(subjets, choice=WChoice.SMALLEST)
    assert smallest.mass[0] == pytest.approx(min(masses))
    target = max(masses) + 1
    closest = w_candidate(subjets, choice=WChoice.CLOSEST, w_mass=target)
    assert closest.mass[0] == pytest.approx(max(masses))
    # softest neighbour first: 40 and 50, with the least min(E)^2 (1 - cos)
    merged = w_candidate(subjets, choice=WChoice.MERGED)
    assert merged.mass[0] == pytest.approx(masses[2])


def test_helicity_angle_of_a_known_decay():
    # W at rest in the laboratory would decay along the top direction: a pair of equal
    # energies at right angles to the flight gives cos = 0
    w_energy = 200.0
    m = 80.379
    p = np.sqrt(w_energy**2 - m**2)
    one = np.array([w_energy / 2, m / 2, 0.0, p / 2])
    other = np.array([w_energy / 2, -m / 2, 0.0, p / 2])
    b = np.array([50.0, 0.0, 0.0, 50.0])
    found = w_candidate(np.stack([one, other, b], axis=1)[:, None, :])
    assert found.mass[0] == pytest.approx(m)
    assert found.helicity[0] == pytest.approx(0.0, abs=1e-9)
    # along the flight the softer subjet goes backward: cos = -1
    first = np.array([(w_energy + p) / 2, 0, 0, (w_energy + p) / 2])
    second = np.array([(w_energy - p) / 2, 0, 0, -(w_energy - p) / 2])
    found = w_candidate(np.stack([first, second, b], axis=1)[:, None, :], w_mass=m)
    assert found.mass[0] == pytest.approx(m)
    assert found.helicity[0] == pytest.approx(-1.0)


def test_fewer_than_three_subjets_have_no_w():
    subjets = np.zeros((4, 1, 3))
    subjets[:, 0, :2] = prongs([10.0, 5.0], [[0, 0, 1], [0, 1, 1]])
    found = w_candidate(subjets)
    assert np.isnan(found.mass[0])
    assert np.isnan(found.helicity[0])


def test_splitting_scales_of_three_particles():
    # example of Catani et al., Phys. Lett. B 269 (1991) 432: d_01 = 800 merges first
    p4 = np.array([[50, 30, 0, 40], [20, 0, 20, 0], [np.sqrt(2900), -30, -20, -40]]).T
    history = cluster_history(p4, [3])
    assert splitting_scale(history, 2)[0] == pytest.approx(np.sqrt(800.0))
    assert splitting_scale(history, 3)[0] == 0.0


def test_scales_of_a_top_are_near_half_the_masses():
    # at rest-like opening sqrt(d_12) ~ m_t/2 and sqrt(d_23) ~ m_W/2 (common practice)
    history = cluster_history(three_prong_top([0, 0.3, 1], 700.0, phi=1.5), [3])
    assert 40 < splitting_scale(history, 1)[0] < 130
    assert 20 < splitting_scale(history, 2)[0] < 80
