"""The detector: what was put in is what comes out."""

from __future__ import annotations

import numpy as np
import pytest

from toprecon.generation import DetectorOptions, ParticleKind, ResponseOptions
from toprecon.generation.detector import (
    Measured,
    charge_sign,
    isolated_leptons,
    measure,
)
from toprecon.generation.particles import Particles, position_in_event

NOTHING = np.zeros(0, dtype=np.int64)


def particles_of(pdg, energy, n=20_000, cosine=0.0):
    """n events with one particle each."""
    sine = np.sqrt(1 - cosine**2)
    p4 = np.outer(np.array([1.0, sine, 0.0, cosine]), np.full(n, energy))
    one = np.ones(n, dtype=np.int64)
    none = np.zeros(n, dtype=np.int64)
    codes = np.full(n, pdg)
    return Particles(p4, codes, one, np.zeros((4, 0)), NOTHING, none)


def see(particles, **settings):
    ids = np.arange(len(particles.counts), dtype=np.uint64) + np.uint64(1000)
    return measure(particles, ids, DetectorOptions(**settings), ResponseOptions())


@pytest.mark.parametrize(
    ("pdg", "energy", "expected"),
    [
        (22, 25.0, np.hypot(0.15 / 5, 0.01)),
        (130, 25.0, np.hypot(0.55 / 5, 0.03)),
        (-2112, 100.0, np.hypot(0.055, 0.03)),
        (211, 50.0, np.hypot(2e-5 * 50, 1e-3)),
        (13, 200.0, np.hypot(2e-5 * 200, 1e-3)),
    ],
)
def test_particles_have_the_resolution_put_in(pdg, energy, expected):
    seen = see(particles_of(pdg, energy))
    momentum = np.sqrt(np.sum(seen.p4[1:] ** 2, axis=0))
    ratio = momentum / energy
    n = len(ratio)
    assert np.mean(ratio) == pytest.approx(1.0, abs=5 * expected / n**0.5)
    assert np.std(ratio) == pytest.approx(expected, rel=5 / (2 * n) ** 0.5)


def test_directions_of_neutral_particles_are_smeared():
    for pdg, spread in ((22, 1e-3), (130, 5e-3)):
        p = see(particles_of(pdg, 20.0)).p4
        assert np.std(p[2] / p[1]) == pytest.approx(spread, rel=0.03)
        assert np.std(p[3] / p[1]) == pytest.approx(spread, rel=0.03)
    assert np.all(see(particles_of(211, 20.0)).p4[3] == 0)


def test_thresholds_and_acceptance():
    assert see(particles_of(12, 50.0)).counts.sum() == 0
    assert see(particles_of(22, 0.19)).counts.sum() == 0
    assert see(particles_of(130, 0.4)).counts.sum() == 0
    assert see(particles_of(211, 0.1)).counts.sum() == 0
    assert see(particles_of(22, 50.0, cosine=0.996)).counts.sum() == 0
    found = see(particles_of(-211, 50.0)).counts
    assert np.mean(found) == pytest.approx(0.995, abs=5 * np.sqrt(0.005 / 20_000))


def test_rates_of_identification():
    response = ResponseOptions()
    n = 20_000
    electrons = see(particles_of(11, 40.0), track_efficiency=1.0)
    share = np.mean(electrons.kind == ParticleKind.ELECTRON)
    assert share == pytest.approx(
        response.lepton_efficiency, abs=5 * np.sqrt(0.97 * 0.03 / n)
    )
    assert np.mean(electrons.charge > 0) == pytest.approx(
        response.lepton_charge_flip * response.lepton_efficiency,
        abs=5 * np.sqrt(0.001 / n),
    )
    pions = see(particles_of(211, 40.0), track_efficiency=1.0)
    for kind, rate in ((ParticleKind.ELECTRON, 0.002), (ParticleKind.MUON, 0.004)):
        assert np.mean(pions.kind == kind) == pytest.approx(
            rate, abs=5 * np.sqrt(rate / n)
        )


def test_charges_of_particles():
    codes = np.array([11, -11, 13, -13, 211, -211, 321, 2212, -2212, 3112, 3312, -3334])
    expected = [-1, 1, -1, 1, 1, -1, 1, 1, -1, -1, -1, 1]
    np.testing.assert_array_equal(charge_sign(codes), expected)


def one_event(*rows):
    """(kind, charge, energy, angle in the transverse plane) of massless particles."""
    kind, charge, energy, phi = np.array(rows, dtype=float).T
    p4 = energy * np.stack([np.ones_like(phi), np.cos(phi), np.sin(phi), 0 * phi])
    return Measured(p4, charge, kind.astype(np.int64), np.array([len(rows)]))


E, MU, PHOTON, HADRON = (
    ParticleKind.ELECTRON,
    ParticleKind.MUON,
    ParticleKind.PHOTON,
    ParticleKind.CHARGED_HADRON,
)


def test_energy_in_the_cone_decides():
    # 50 GeV: the cone opens by 10 GeV / 50 GeV = 0.2 rad
    for energy, expected in ((7.4, 1), (7.6, 0)):
        event = one_event((MU, -1, 50, 0), (HADRON, 1, energy, 0.19))
        leptons, used = isolated_leptons(event, DetectorOptions())
        assert leptons.counts[0] == expected
        assert used.sum() == expected
        if expected:
            assert leptons.isolation[0] == pytest.approx(energy / 50)
            assert leptons.pdg[0] == 13
            assert leptons.charge[0] == -1
    event = one_event((MU, -1, 50, 0), (HADRON, 1, 30, 0.21))
    assert isolated_leptons(event, DetectorOptions())[0].counts[0] == 1


def test_soft_leptons_do_not_count():
    event = one_event((E, 1, 9.9, 0), (HADRON, 1, 30, 1.0))
    assert isolated_leptons(event, DetectorOptions())[0].counts[0] == 0


def test_photons_near_an_isolated_lepton_are_added():
    event = one_event(
        (E, 1, 30, 0), (PHOTON, 0, 10, 0.02), (PHOTON, 0, 3, 0.1), (MU, 1, 60, 2.0)
    )
    leptons, used = isolated_leptons(event, DetectorOptions())
    np.testing.assert_allclose(leptons.p4[0], [60, 40])
    np.testing.assert_array_equal(leptons.pdg, [-13, -11])
    np.testing.assert_array_equal(used, [True, True, False, True])


def test_no_candidates_no_leptons():
    event = one_event((HADRON, 1, 30, 0.1), (PHOTON, 0, 20, 0.3))
    leptons, used = isolated_leptons(event, DetectorOptions())
    assert leptons.p4.shape == (4, 0)
    assert not used.any()


def test_positions_count_within_events():
    np.testing.assert_array_equal(position_in_event([2, 0, 3]), [0, 1, 0, 1, 2])
