"""Speed of the boosted branch: the whole chain on 10 000 events of 90 particles."""

from __future__ import annotations

import time

import fastjet
import numpy as np
import pytest

from tests.boosted.toys import make_toy_events, prongs
from toprecon.boosted import BoostedOptions, find_tops
from toprecon.boosted.fatjets import read_particles
from toprecon.events import Channel
from toprecon.jets import cluster_durham

N_EVENTS, N_PARTICLES = 10_000, 90


@pytest.fixture(scope="module")
def boosted_events():
    """Two sprays of particles back to back, each around three directions."""
    rng = np.random.default_rng(1)
    particles = []
    for _ in range(N_EVENTS):
        axis = rng.normal(size=3)
        prong = rng.normal(size=(6, 3)) * 0.25
        prong += (
            np.where(np.arange(6)[:, None] < 3, 1, -1) * axis / np.linalg.norm(axis)
        )
        directions = prong[rng.integers(0, 6, size=N_PARTICLES)]
        directions = directions + 0.05 * rng.normal(size=(N_PARTICLES, 3))
        particles.append(prongs(rng.exponential(15.0, size=N_PARTICLES), directions))
    return make_toy_events(particles)


@pytest.mark.benchmark
@pytest.mark.timeout(600)
def test_ten_thousand_boosted_events_in_a_minute(boosted_events):
    start = time.perf_counter()
    tops = find_tops(boosted_events, BoostedOptions(), channel=Channel.ALL_HADRONIC)
    seconds = time.perf_counter() - start
    print(f"\n{N_EVENTS} events, two fat jets each: {seconds:.1f} s")
    assert len(tops) == N_EVENTS
    assert seconds <= 60.0


@pytest.mark.benchmark
@pytest.mark.timeout(600)
def test_clustering_all_events_at_once_beats_a_loop_over_events(boosted_events):
    particles = read_particles(boosted_events[:2000])
    start = time.perf_counter()
    jets = cluster_durham(particles.p4, particles.counts, 2)
    at_once = time.perf_counter() - start
    definition = fastjet.JetDefinition0Param(fastjet.ee_kt_algorithm)
    stops = np.cumsum(particles.counts)
    found = []
    start = time.perf_counter()
    for first, last in zip(stops - particles.counts, stops, strict=True):
        inputs = [
            fastjet.PseudoJet(p[1], p[2], p[3], p[0])
            for p in particles.p4[:, first:last].T.tolist()
        ]
        sequence = fastjet.ClusterSequence(inputs, definition)
        found += [j.E() for j in fastjet.sorted_by_E(sequence.exclusive_jets(2))]
    looped = time.perf_counter() - start
    np.testing.assert_allclose(jets.p4[0], found, rtol=1e-10)
    print(f"\nat once {at_once:.2f} s, loop {looped:.2f} s: {looped / at_once:.1f}x")
    assert looped > 1.3 * at_once
