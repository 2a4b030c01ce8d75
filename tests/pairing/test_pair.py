"""Properties of the pairing: what it must not depend on, and what it refuses."""

from __future__ import annotations

import itertools

import awkward as ak
import numpy as np
import pytest

from tests.pairing.pair_toys import toy_arrays, toy_events
from toprecon.errors import MissingFieldError, OptionError
from toprecon.events import Channel, Status, components
from toprecon.kinematics import cos_theta
from toprecon.pairing import PairingOptions, build, contributions, pair

CHANNELS = [
    (Channel.LEPTON_JETS, 4),
    (Channel.LEPTON_JETS, 6),
    (Channel.ALL_HADRONIC, 6),
]
EVERY_TERM = PairingOptions()
for _term in EVERY_TERM.terms:
    EVERY_TERM = EVERY_TERM.with_term(_term.name, on=True)
ALL_TERMS = EVERY_TERM.replace(tags="ignore")


@pytest.mark.parametrize(("channel", "n_jets"), CHANNELS)
@pytest.mark.parametrize("options", [PairingOptions(), ALL_TERMS])
def test_the_order_of_the_jets_does_not_matter(channel, n_jets, options, rng):
    arrays = toy_arrays(n_jets=n_jets)
    order = rng.permuted(np.tile(np.arange(n_jets), (40, 1)), axis=1)
    mixed = dict(arrays)
    for name in ("btag", "vertex_charge", "track_charge"):
        mixed[name] = np.take_along_axis(arrays[name], order, axis=1)
    mixed["jets"] = np.take_along_axis(arrays["jets"], order[None], axis=2)
    one = pair(toy_events(arrays), options, channel=channel)
    two = pair(toy_events(mixed), options, channel=channel)
    assert np.allclose(one.chi2, two.chi2, rtol=1e-9)
    assert np.allclose(components(one.top), components(two.top), rtol=1e-9, atol=1e-9)


@pytest.mark.parametrize(("channel", "n_jets"), CHANNELS)
def test_a_rotation_about_the_beam_only_rotates_the_tops(channel, n_jets):
    arrays = toy_arrays(n_jets=n_jets)
    turned = dict(arrays)
    c, s = np.cos(0.7), np.sin(0.7)
    for name in ("jets", "lepton"):
        p = arrays[name].copy()
        p[1], p[2] = (
            c * arrays[name][1] - s * arrays[name][2],
            (s * arrays[name][1] + c * arrays[name][2]),
        )
        turned[name] = p
    one = pair(toy_events(arrays), ALL_TERMS, channel=channel)
    two = pair(toy_events(turned), ALL_TERMS, channel=channel)
    assert np.array_equal(one.assignment, two.assignment)
    assert np.allclose(one.chi2, two.chi2, rtol=1e-8)
    assert np.allclose(
        cos_theta(components(one.top)), cos_theta(components(two.top)), atol=1e-9
    )


@pytest.mark.parametrize(("channel", "n_jets"), CHANNELS)
def test_charge_conjugation_exchanges_top_and_antitop(channel, n_jets):
    arrays = toy_arrays(n_jets=n_jets)
    conjugate = dict(arrays)
    for name in ("charge", "vertex_charge", "track_charge"):
        conjugate[name] = -arrays[name]
    one = pair(toy_events(arrays), ALL_TERMS, channel=channel)
    two = pair(toy_events(conjugate), ALL_TERMS, channel=channel)
    assert np.allclose(components(one.top), components(two.antitop))
    assert np.allclose(components(one.w_minus), components(two.w_plus))
    # seen along the antitop, the angle of the top is mirrored: p(top) - p(antitop)
    angle = [cos_theta(components(t.top) - components(t.antitop)) for t in (one, two)]
    assert np.allclose(angle[0], -angle[1])


@pytest.mark.parametrize(("channel", "n_jets"), CHANNELS)
def test_the_choice_is_the_least_of_all_assignments_built_one_by_one(channel, n_jets):
    events = toy_events(toy_arrays(n=12, n_jets=n_jets))
    chosen = pair(events, ALL_TERMS, channel=channel)
    n_used = 4 if channel is Channel.LEPTON_JETS else 6
    lepton_is_positive = ak.to_numpy(events.leptons.charge[:, 0]) > 0
    least = np.full(12, np.inf)
    for jets in itertools.permutations(range(n_jets), n_used):
        row = [*jets, -1, -1] if n_used == 4 else list(jets)
        assignment = np.tile(np.array(row, np.int8), (12, 1))
        if n_used == 4:
            swapped = assignment[:, [3, 4, 5, 0, 1, 2]]
            assignment = np.where(lepton_is_positive[:, None], swapped, assignment)
        terms = contributions(events, assignment, ALL_TERMS, channel=channel)
        least = np.minimum(least, sum(terms.values()))
    assert np.allclose(chosen.chi2, least, rtol=1e-9)
    assert np.allclose(
        sum(contributions(events, chosen, ALL_TERMS, channel=channel).values()), least
    )


def test_the_order_of_the_w_jets_does_not_change_what_is_built():
    events = toy_events(toy_arrays())
    straight = np.tile(np.array([0, 1, 2, 3, -1, -1], np.int8), (40, 1))
    crossed = straight[:, [0, 2, 1, 3, 4, 5]]
    one, two = build(events, straight), build(events, crossed)
    assert np.allclose(components(one.w_plus), components(two.w_plus))


@pytest.mark.parametrize("channel", list(Channel))
def test_no_events_give_no_tops_with_all_columns(channel):
    events = toy_events(toy_arrays(n_jets=6))
    tops, none = (pair(e, channel=channel) for e in (events, events[:0]))
    assert len(none) == 0
    assert none.fields == tops.fields
    assert none.observables.fields == tops.observables.fields


def test_events_that_cannot_be_paired_say_why():
    few = pair(toy_events(toy_arrays(n_jets=3)))
    no_lepton = pair(toy_events(toy_arrays(), n_leptons=0))
    arrays = toy_arrays()
    arrays["jets"][1, 0, 0] = np.nan
    broken = pair(toy_events(arrays))
    assert (ak.to_numpy(few.status) == Status.TOO_FEW_OBJECTS).all()
    assert (ak.to_numpy(no_lepton.status) == Status.TOO_FEW_OBJECTS).all()
    assert broken.status[0] == Status.NON_FINITE
    assert (ak.to_numpy(broken.status[1:]) == Status.OK).all()
    for tops in (few, no_lepton, broken[:1]):
        assert np.isnan(components(tops.top)).all()
        assert (ak.to_numpy(tops.assignment) == -1).all()


def test_stored_missing_momentum_that_is_not_there_is_asked_for():
    options = PairingOptions(neutrino={"source": "stored"})
    with pytest.raises(MissingFieldError, match=r"'missing' .* set it to 'objects'"):
        pair(toy_events(toy_arrays()), options)


def test_a_term_listed_twice_is_refused():
    terms = ({"name": "w_mass"}, {"name": "w_mass"})
    with pytest.raises(OptionError, match="got w_mass twice"):
        PairingOptions(terms=terms)


def test_masses_that_allow_no_decay_are_refused():
    with pytest.raises(OptionError, match=r"above w_mass \+ b_mass; got 80"):
        PairingOptions(top_mass=80)
