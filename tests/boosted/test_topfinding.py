from __future__ import annotations

import awkward as ak
import numpy as np
import pytest

from tests.boosted.toys import make_toy_events, prongs, three_prong_top, toy_pair
from toprecon.boosted import (
    OBSERVABLES,
    SUBSTRUCTURE,
    Axis,
    BoostedOptions,
    fat_jet_table,
    find_tops,
)
from toprecon.events import TOPS_FIELDS, Channel, Status, components

OFF = BoostedOptions(substructure={"z_cut": 0.0})


def observable(tops, name):
    return ak.to_numpy(tops.observables[f"boosted.{name}"])


def test_a_top_and_its_w_are_found_in_lepton_jets_events():
    pairs = [toy_pair(-1.0), toy_pair(+1.0)]
    events = make_toy_events([p for p, _ in pairs], leptons=[x for _, x in pairs])
    tops = find_tops(events, OFF)
    assert set(TOPS_FIELDS) <= set(tops.fields)
    assert ak.to_numpy(tops.status).tolist() == [Status.OK, Status.OK]
    # a negative lepton comes from the antitop: the hadronic side is the top
    assert ak.to_numpy(tops.hadronic_side).tolist() == [1, -1]
    hadronic = pairs[0][0][:, :3]
    np.testing.assert_allclose(components(tops.top)[:, 0], hadronic.sum(axis=1))
    np.testing.assert_allclose(components(tops.antitop)[:, 1], hadronic.sum(axis=1))
    np.testing.assert_allclose(components(tops.w_plus)[:, 0], hadronic[:, 1:].sum(1))
    assert observable(tops, "groomed_mass")[0] == pytest.approx(172.5)
    assert observable(tops, "w_mass")[0] == pytest.approx(80.379)
    assert observable(tops, "n_tagged").tolist() == [1, 1]
    assert ak.to_numpy(tops.assignment).tolist() == [[-1] * 6] * 2


def test_the_leptonic_top_is_b_lepton_and_missing_momentum():
    particles, lepton = toy_pair(-1.0)
    events = make_toy_events([particles], leptons=[lepton])
    tops = find_tops(events, OFF)
    total = components(tops.top) + components(tops.antitop)
    np.testing.assert_allclose(total[1:, 0], 0.0, atol=1e-9)
    neutrino = components(tops.neutrino)[:, 0]
    assert neutrino[0] == pytest.approx(np.linalg.norm(neutrino[1:]))
    w = components(tops.w_minus)[:, 0]
    np.testing.assert_allclose(w, neutrino + lepton[:4, 0])


def test_axis_is_taken_before_or_after_grooming():
    soft = prongs([15.0], [[0.3, 1, 0.2]])
    particles, lepton = toy_pair()
    particles = np.concatenate([particles, soft], axis=1)
    events = make_toy_events([particles], leptons=[lepton])
    energy = {}
    for axis in Axis:
        options = BoostedOptions(axis=axis, substructure={"z_cut": 0.05, "beta": 0.0})
        energy[axis] = components(find_tops(events, options).top)[0, 0]
    assert energy[Axis.GROOMED] == pytest.approx(700.0)
    assert energy[Axis.UNGROOMED] == pytest.approx(715.0)


def test_events_that_cannot_be_reconstructed_have_a_status_and_nan():
    particles, lepton = toy_pair()
    broken = particles.copy()
    broken[1, 0] = np.nan
    bad_lepton = lepton.copy()
    bad_lepton[0] = np.inf
    none = np.zeros((5, 0))
    events = make_toy_events(
        [particles, particles, broken, particles[:, :1], particles],
        leptons=[lepton, none, lepton, lepton, bad_lepton],
    )
    tops = find_tops(events, OFF)
    assert ak.to_numpy(tops.status).tolist() == [
        Status.OK,
        Status.TOO_FEW_OBJECTS,
        Status.NON_FINITE,
        Status.TOO_FEW_OBJECTS,
        Status.NON_FINITE,
    ]
    assert np.isnan(components(tops.top)[:, 1:]).all()
    assert ak.to_numpy(tops.hadronic_side)[1:].tolist() == [0] * 4
    for item in OBSERVABLES:
        assert np.isnan(ak.to_numpy(tops.observables[item.name])[1:]).all()


def test_all_hadronic_sign_follows_the_charges():
    first = three_prong_top([1, 0, 0.3], 720.0)
    second = three_prong_top([-1, 0, -0.3], 700.0)
    both = np.concatenate([first, second], axis=1)
    jets = np.concatenate(
        [
            both,
            [[0.9, 0.1, 0.1, 0.8, 0.1, 0.1]],
            [[-1.0, 3.0, 3.0, 1.0, -3.0, -3.0]],
        ]
    )
    flipped = jets.copy()
    flipped[5] *= -1
    events = make_toy_events([both, both], jets=[jets, flipped])
    tops = find_tops(events, OFF, channel=Channel.ALL_HADRONIC)
    # the vertex charge of the jet with the highest b score counts, not the others
    assert ak.to_numpy(tops.sign).tolist() == [1, -1]
    np.testing.assert_allclose(components(tops.top)[:, 0], first.sum(axis=1))
    np.testing.assert_allclose(components(tops.antitop)[:, 1], first.sum(axis=1))
    share = ak.to_numpy(tops.sign_share)
    assert share[0] == share[1] == pytest.approx(1 / (1 + np.exp(-2.0)))
    assert observable(tops, "n_tagged").tolist() == [2, 2]
    assert observable(tops, "second_groomed_mass")[0] == pytest.approx(172.5)


def test_observables_are_those_announced():
    particles, lepton = toy_pair()
    tops = find_tops(make_toy_events([particles], leptons=[lepton]), OFF)
    assert tops.observables.fields == [item.name for item in OBSERVABLES]
    assert len({item.name for item in OBSERVABLES}) == len(OBSERVABLES)
    for item in OBSERVABLES:
        assert item.name.startswith("boosted.")
        assert item.range[0] < item.range[1]
    assert {f"boosted.{name}" for name in SUBSTRUCTURE} <= set(tops.observables.fields)


def test_no_events_give_no_tops():
    particles, lepton = toy_pair()
    events = make_toy_events([particles], leptons=[lepton])[:0]
    for channel in Channel:
        tops = find_tops(events, channel=channel)
        assert len(tops) == 0
        assert set(TOPS_FIELDS) <= set(tops.fields)


def test_blocks_of_events_give_the_same_tops(monkeypatch, rng):
    events = make_toy_events(
        [toy_pair()[0] for _ in range(7)], leptons=[toy_pair()[1] for _ in range(7)]
    )
    whole = find_tops(events)
    monkeypatch.setattr("toprecon.boosted.topfinding._BLOCK", 3)
    blocks = find_tops(events)
    assert blocks.fields == whole.fields
    np.testing.assert_array_equal(components(blocks.top), components(whole.top))


def test_rotating_an_event_about_the_beam_rotates_its_tops(rng):
    particles, lepton = toy_pair()
    c, s = np.cos(1.1), np.sin(1.1)

    def rotate(p):
        out = p.copy()
        out[1], out[2] = c * p[1] - s * p[2], s * p[1] + c * p[2]
        return out

    events = make_toy_events(
        [particles, rotate(particles)], leptons=[lepton, rotate(lepton)]
    )
    tops = find_tops(events)
    p = components(tops.top)
    np.testing.assert_allclose(rotate(p[:, :1])[:, 0], p[:, 1], atol=1e-7)
    for name in SUBSTRUCTURE:
        one, other = observable(tops, name)
        # 1e-5: W helicity of exactly symmetric toys is 0 up to rounding
        assert other == pytest.approx(one, rel=1e-6, abs=1e-5, nan_ok=True)


def test_fat_jet_table_has_one_row_per_candidate():
    particles, lepton = toy_pair()
    events = make_toy_events(
        [particles] * 3, leptons=[lepton, np.zeros((5, 0)), lepton]
    )
    table = fat_jet_table(events)
    assert table["event"].tolist() == [0, 2]
    both = fat_jet_table(events, channel=Channel.ALL_HADRONIC)
    assert len(both["groomed_mass"]) == 6
