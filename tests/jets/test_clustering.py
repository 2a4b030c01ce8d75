from __future__ import annotations

import awkward as ak
import fastjet
import numpy as np
import pytest

from toprecon.errors import InputError, OptionError
from toprecon.jets import cluster_durham, cluster_generalised_kt


def classic_jets(p4, definition):
    """Cluster sequence of one event through FastJet's own classes."""
    inputs = []
    for i, p in enumerate(p4.T):
        particle = fastjet.PseudoJet(p[1], p[2], p[3], p[0])
        particle.set_user_index(i)
        inputs.append(particle)
    return fastjet.ClusterSequence(inputs, definition)


def by_event(jets, counts):
    """Momenta of every event, as a list of arrays (4, J)."""
    stops = np.cumsum(counts)
    return [jets[:, b - a : b] for a, b in zip(counts, stops, strict=True)]


@pytest.mark.parametrize("n_jets", [1, 2, 4])
def test_durham_jets_are_those_of_fastjet_event_by_event(particles, n_jets):
    p4, counts = particles
    jets = cluster_durham(p4, counts, n_jets)
    definition = fastjet.JetDefinition0Param(fastjet.ee_kt_algorithm)
    first = np.cumsum(counts) - counts
    for i, found in enumerate(by_event(jets.p4, jets.counts)):
        if counts[i] < n_jets:
            assert found.shape[1] == 0
            assert np.isnan(jets.scales[i]).all()
            continue
        event = slice(first[i], first[i] + counts[i])
        sequence = classic_jets(p4[:, event], definition)
        expected = fastjet.sorted_by_E(sequence.exclusive_jets(n_jets))
        for k, jet in enumerate(expected):
            members = sorted(c.user_index() for c in jet.constituents())
            assert np.flatnonzero(jets.jet_index[event] == k).tolist() == members
            want = [jet.E(), jet.px(), jet.py(), jet.pz()]
            np.testing.assert_allclose(found[:, k], want, rtol=1e-12, atol=1e-12)
        if counts[i] > n_jets:
            assert jets.scales[i, 0] == pytest.approx(
                sequence.exclusive_dmerge(n_jets), rel=1e-10
            )
        if n_jets > 1:
            assert jets.scales[i, 1] == pytest.approx(
                sequence.exclusive_dmerge(n_jets - 1), rel=1e-10
            )


@pytest.mark.parametrize(("power", "radius"), [(1.0, 0.7), (0.0, 1.0), (-1.0, 1.2)])
def test_inclusive_jets_are_those_of_fastjet_event_by_event(particles, power, radius):
    p4, counts = particles
    jets = cluster_generalised_kt(
        p4, counts, power=power, radius=radius, minimum_energy=5.0
    )
    definition = fastjet.JetDefinition(fastjet.ee_genkt_algorithm, radius, power)
    first = np.cumsum(counts) - counts
    for i, found in enumerate(by_event(jets.p4, jets.counts)):
        event = slice(first[i], first[i] + counts[i])
        if counts[i] == 0:
            assert found.shape[1] == 0
            continue
        sequence = classic_jets(p4[:, event], definition)
        expected = [
            j for j in fastjet.sorted_by_E(sequence.inclusive_jets()) if j.E() >= 5.0
        ]
        np.testing.assert_allclose(found[0], [j.E() for j in expected], rtol=1e-12)
        for k, jet in enumerate(expected):
            members = sorted(c.user_index() for c in jet.constituents())
            assert np.flatnonzero(jets.jet_index[event] == k).tolist() == members


def test_exclusive_generalised_kt_with_power_one_is_durham(particles):
    # manual of FastJet (arXiv:1111.6097): for p = 1 and R > pi the order is that of kT
    p4, counts = particles
    ours = cluster_generalised_kt(p4, counts, power=1.0, n_jets=3)
    durham = cluster_durham(p4, counts, 3)
    np.testing.assert_array_equal(ours.jet_index, durham.jet_index)
    np.testing.assert_allclose(ours.p4, durham.p4, rtol=1e-12, atol=1e-10)


def test_radii_may_differ_from_event_to_event(particles):
    p4, counts = particles
    radius = np.where(np.arange(len(counts)) % 2, 0.5, 1.0)
    mixed = cluster_generalised_kt(p4, counts, power=-1, radius=radius)
    for value in (0.5, 1.0):
        same = cluster_generalised_kt(p4, counts, power=-1, radius=value)
        rows = np.repeat(radius == value, counts)
        np.testing.assert_array_equal(mixed.jet_index[rows], same.jet_index[rows])


def test_jets_conserve_momentum(particles):
    p4, counts = particles
    jets = cluster_durham(p4, counts, 2)
    event = np.repeat(np.arange(len(counts)), counts)
    owner = np.repeat(np.arange(len(counts)), jets.counts)
    for i in range(4):
        total = np.bincount(event, weights=p4[i], minlength=len(counts))
        in_jets = np.bincount(owner, weights=jets.p4[i], minlength=len(counts))
        some = counts >= 2
        np.testing.assert_allclose(total[some], in_jets[some], atol=1e-9)


def test_jets_do_not_depend_on_the_chunking(particles):
    p4, counts = particles
    whole = cluster_durham(p4, counts, 3)
    cut = 17
    n = int(counts[:cut].sum())
    parts = [
        cluster_durham(p4[:, :n], counts[:cut], 3),
        cluster_durham(p4[:, n:], counts[cut:], 3),
    ]
    np.testing.assert_array_equal(
        whole.p4, np.concatenate([part.p4 for part in parts], axis=1)
    )


def test_no_events_give_no_jets():
    jets = cluster_durham(np.zeros((4, 0)), np.zeros(0, dtype=int), 2)
    assert jets.p4.shape == (4, 0)
    assert jets.scales.shape == (0, 2)
    inclusive = cluster_generalised_kt(np.zeros((4, 0)), [0, 0], radius=1.0)
    assert inclusive.counts.tolist() == [0, 0]


def test_wrong_input_is_refused_in_one_sentence():
    with pytest.raises(OptionError, match="n_jets: at least 1 is required; got 0"):
        cluster_durham(np.ones((4, 1)), [1], 0)
    with pytest.raises(OptionError, match="radius: must be > 0 rad; got -1"):
        cluster_generalised_kt(np.ones((4, 1)), [1], radius=-1.0)
    with pytest.raises(InputError, match=r"shape \(4, N\) with N = sum of counts"):
        cluster_durham(np.ones((4, 2)), [1], 1)
    with pytest.raises(InputError, match="momenta must be finite; got NaN"):
        cluster_durham(np.full((4, 1), np.nan), [1], 1)


def test_the_vectorised_interface_agrees_on_jets_of_many_events(particles):
    p4, counts = particles
    keep = np.repeat(counts >= 2, counts)
    array = ak.unflatten(
        ak.zip(dict(zip(("E", "px", "py", "pz"), p4[:, keep], strict=True))),
        counts[counts >= 2],
    )
    definition = fastjet.JetDefinition0Param(fastjet.ee_kt_algorithm)
    scale = fastjet.ClusterSequence(array, definition).exclusive_dmerge(1)
    ours = cluster_durham(p4, counts, 1).scales[counts >= 2, 0]
    np.testing.assert_allclose(ours, ak.to_numpy(scale), rtol=1e-10)
