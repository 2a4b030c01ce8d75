from __future__ import annotations

import awkward as ak
import numpy as np
import pytest

from tests.boosted.toys import make_toy_events, three_prong_top, toy_pair
from toprecon.boosted import (
    BoostedOptions,
    contained,
    containment_class,
    decay_opening,
    find_tops,
)
from toprecon.events import Channel, PairingClass
from toprecon.kinematics import angle


def truth_of(quarks, leptons, *, hadronic_top=True):
    """Truth of one event: (b, q, q) of the hadronic side and (b, l, nu)."""
    sides = (quarks, leptons) if hadronic_top else (leptons, quarks)
    pdg = ((2, -1), (14, -13)) if hadronic_top else ((14, -13), (2, -1))
    names = (("top", "w_plus", "b"), ("antitop", "w_minus", "bbar"))
    truth = {}
    for (top, w, b), side, code in zip(names, sides, pdg, strict=True):
        truth[top] = side.sum(axis=1)[:, None]
        truth[w] = side[:, 1:].sum(axis=1)[:, None]
        truth[b] = side[:, :1]
        for k, part in enumerate(("up", "down")):
            truth[f"{w}_{part}"] = (side[:, k + 1, None], {"pdg": [code[k]]})
    return truth


@pytest.fixture
def pair():
    particles, lepton = toy_pair(-1.0)
    leptonic = three_prong_top([-1.0, 0.0, -0.2], 700.0)
    return particles, lepton, leptonic


def test_quarks_in_their_fat_jet_are_contained(pair):
    particles, lepton, leptonic = pair
    truth = truth_of(particles[:, :3], leptonic)
    events = make_toy_events([particles], leptons=[lepton], truth=truth)
    tops = find_tops(events)
    assert contained(events, tops).tolist() == [True]
    code = containment_class(events, tops, is_signal_process=np.array([True]))
    assert code.tolist() == [PairingClass.CORRECT]


def test_a_quark_in_the_other_fat_jet_leaks(pair):
    particles, lepton, leptonic = pair
    quarks = particles[:, :3].copy()
    quarks[1:, 2] *= -1
    events = make_toy_events(
        [particles], leptons=[lepton], truth=truth_of(quarks, leptonic)
    )
    tops = find_tops(events)
    assert contained(events, tops).tolist() == [False]
    code = containment_class(events, tops, is_signal_process=np.array([True]))
    assert code.tolist() == [PairingClass.LEAKING]


def test_a_jet_of_limited_radius_must_reach_the_quark(pair):
    particles, lepton, leptonic = pair
    events = make_toy_events(
        [particles], leptons=[lepton], truth=truth_of(particles[:, :3], leptonic)
    )
    opening = angle(particles[:, :3], particles[:, :3].sum(axis=1)[:, None]).max()
    assert decay_opening(events)[0, 0] == pytest.approx(opening)
    for radius, expected in ((opening * 1.05, True), (opening * 0.95, False)):
        options = BoostedOptions(algorithm="inclusive", power=0, radius=radius)
        whole = find_tops(events)  # axes of the whole hemispheres
        assert contained(events, whole, options).tolist() == [expected]


def test_classes_without_truth_without_signal_and_of_another_channel(pair):
    particles, lepton, leptonic = pair
    truth = truth_of(particles[:, :3], leptonic)
    events = make_toy_events([particles], leptons=[lepton], truth=truth)
    tops = find_tops(events)
    signal = np.array([True])

    def code(events, is_signal=signal, channel=Channel.LEPTON_JETS):
        return PairingClass(
            containment_class(
                events, tops, is_signal_process=is_signal, channel=channel
            )[0]
        )

    assert code(events, ~signal) is PairingClass.NOT_SIGNAL
    assert code(events, channel=Channel.ALL_HADRONIC) is PairingClass.UNMATCHED
    bare = make_toy_events([particles], leptons=[lepton])
    assert code(bare) is PairingClass.NO_TRUTH
    assert contained(bare, tops).tolist() == [False]


def test_containment_is_blind_to_the_charge(pair):
    particles, lepton, leptonic = pair
    wrong_charge = lepton.copy()
    wrong_charge[4] *= -1
    truth = truth_of(particles[:, :3], leptonic)
    events = make_toy_events([particles], leptons=[wrong_charge], truth=truth)
    tops = find_tops(events)
    assert ak.to_numpy(tops.hadronic_side).tolist() == [-1]
    assert contained(events, tops).tolist() == [True]
