"""Jets of showered events."""

from __future__ import annotations

from statistics import NormalDist

import awkward as ak
import numpy as np
import pytest

from tests.require import require
from toprecon.events import components
from toprecon.generation import GenerationOptions, generate
from toprecon.generation.detector import isolated_leptons, measure
from toprecon.generation.heavyflavour import quark_codes
from toprecon.generation.jetmaking import find_jets, jet_flavour
from toprecon.generation.particles import Particles
from toprecon.kinematics import angle

require("pythia8mc")
from tests.generation.showered import showered_sample


@pytest.fixture(scope="module")
def found():
    options, _partons, ids, particles = showered_sample()
    measured = measure(particles, ids, options.detector, options.response)
    _, used = isolated_leptons(measured, options.detector)
    rest = measured.take(~used)
    jets = find_jets(rest, particles, ids, 4, options.detector, options.response)
    return options, rest, jets


def durham_by_hand(p, n_jets):
    """Textbook Durham clustering of one event, recombination by adding momenta."""
    # S. Catani et al., Phys. Lett. B269 (1991) 432
    jets = [q.copy() for q in p.T]
    members = [{i} for i in range(len(jets))]
    while len(jets) > n_jets:
        best, pair = np.inf, (0, 1)
        for i in range(len(jets)):
            for j in range(i):
                a, b = jets[i], jets[j]
                cosine = a[1:] @ b[1:]
                cosine /= np.sqrt((a[1:] @ a[1:]) * (b[1:] @ b[1:]))
                distance = 2 * min(a[0], b[0]) ** 2 * (1 - cosine)
                if distance < best:
                    best, pair = distance, (i, j)
        i, j = pair
        jets[j] = jets[j] + jets[i]
        members[j] |= members[i]
        del jets[i], members[i]
    return {frozenset(m) for m in members}


@pytest.mark.slow
def test_jets_are_those_of_textbook_clustering(found):
    _, rest, jets = found
    starts = np.cumsum(rest.counts) - rest.counts
    for event in range(6):
        rows = slice(starts[event], starts[event] + rest.counts[event])
        expected = durham_by_hand(rest.p4[:, rows], 4)
        label = jets.jet_index[rows]
        assert {frozenset(np.flatnonzero(label == k)) for k in range(4)} == expected


def test_jets_are_the_sum_of_their_particles(found):
    _, rest, jets = found
    total = np.zeros_like(jets.p4)
    starts = np.cumsum(jets.counts) - jets.counts
    np.add.at(
        total, (slice(None), starts[rest.event] + jets.jet_index), jets.particle_p4
    )
    np.testing.assert_allclose(total, jets.p4, rtol=1e-9, atol=1e-9)
    energy = jets.p4[0].reshape(-1, 4)
    assert np.all(np.diff(energy, axis=1) <= 0)


def test_confusion_widens_the_jets_as_put_in(found):
    options, rest, jets = found
    _, _, ids, particles = showered_sample()
    sharp = options.detector.replace(jet_confusion=0.0)
    plain = find_jets(rest, particles, ids, 4, sharp, options.response)
    # the same jets by direction, which the scale does not touch
    a, b = (j.p4.reshape(4, -1, 4) for j in (jets, plain))
    opening = angle(a[:, :, :, None], b[:, :, None, :])
    match = np.argmin(opening, axis=2)
    ratio = a[0] / np.take_along_axis(b[0], match, axis=1)
    assert np.std(ratio) == pytest.approx(0.03, rel=5 / np.sqrt(2 * ratio.size))


def test_tag_rates_and_charge_purities_are_those_put_in(found):
    options, _, jets = found
    flavour = np.abs(jets.flavour)
    for code, share in ((5, 0.80), (4, 0.10), (1, 0.01)):
        tagged = jets.btag[flavour == code] > 0.5
        error = 5 * np.sqrt(share * (1 - share) / len(tagged))
        assert np.mean(tagged) == pytest.approx(share, abs=error)
    b = flavour == 5
    right = np.sign(jets.vertex_charge[b]) == -np.sign(jets.flavour[b])
    assert np.mean(right) == pytest.approx(0.72, abs=5 * 0.45 / np.sqrt(b.sum()))
    width = np.std(jets.vertex_charge[~b])
    assert width == pytest.approx(1.0, rel=0.1)
    assert NormalDist().cdf(0.583) == pytest.approx(
        options.response.vertex_charge_purity, abs=1e-3
    )


def test_track_charge_tells_b_from_bbar(found):
    # common practice: right sign in about two of three b jets
    _, _, jets = found
    b = np.abs(jets.flavour) == 5
    right = np.sign(jets.track_charge[b]) == -np.sign(jets.flavour[b])
    assert np.mean(right) == pytest.approx(0.67, abs=5 * 0.47 / np.sqrt(b.sum()))


def test_b_jets_point_along_the_b_quarks(found):
    _, _, jets = found
    _, partons, _, _ = showered_sample()
    p = jets.p4.reshape(4, -1, 4)
    flavour = jets.flavour.reshape(-1, 4)
    has_b = np.any(flavour == 5, axis=1)
    which = np.argmax(flavour == 5, axis=1)
    rows = np.flatnonzero(has_b)
    opening = angle(p[:, rows, which[rows]], partons.momenta["b"][:, rows])
    assert np.median(opening) < 0.06
    assert np.mean(has_b) > 0.9


def test_flavour_of_a_jet_comes_from_the_nearest_hadrons():
    jets = np.array([[50.0, 50, 0, 0], [50, 0, 50, 0], [50, 0, 0, 50]]).T
    hadrons = np.array(
        [[20.0, 19, 1, 0], [30, 29, 0, 1], [10, 0, 9, 1], [5, 1, 4, 0]]
    ).T
    truth = Particles(
        np.zeros((4, 0)),
        np.zeros(0, int),
        np.array([0]),
        hadrons,
        np.array([-511, 421, 431, -4122]),
        np.array([4]),
    )
    # b before the harder c; of two c hadrons the harder; nothing is light
    np.testing.assert_array_equal(jet_flavour(jets, np.array([3]), truth), [5, 4, 1])


def test_quarks_in_hadrons():
    # Monte Carlo numbering scheme: B+ (521) holds bbar, Lambda_b (5122) holds b
    codes = np.array([521, -511, 5122, -5232, 411, -421, 4122, -4332])
    np.testing.assert_array_equal(quark_codes(codes), [-5, 5, 5, -5, 4, -4, 4, -4])


@pytest.mark.slow
def test_two_of_three_events_have_a_jet_near_every_quark():
    # 68 % within 0.3 rad in a sample of the same physics simulated independently
    options = GenerationOptions(simulation="shower", keep_particles=True)
    events = generate(1_000, options, seed=2)
    from toprecon.events import Channel
    from toprecon.truth import closest_assignment

    matching = closest_assignment(events, channel=Channel.LEPTON_JETS)
    assert np.mean(matching.angle < 0.3) == pytest.approx(0.68, abs=5 * 0.47 / 31)


def test_particles_are_stored_with_their_jet():
    options = GenerationOptions(simulation="shower", keep_particles=True)
    events = generate(20, options, seed=2)
    particles = events.particles
    for k in range(4):
        mine = particles[particles.jet_index == k]
        total = ak.to_numpy(ak.sum(mine.E, axis=1))
        np.testing.assert_allclose(total, ak.to_numpy(events.jets.E[:, k]), rtol=1e-9)
    assert components(ak.flatten(particles)).shape[0] == 4
