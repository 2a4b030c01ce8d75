"""The neutrino from the W mass, from a photon along the beam, from what is missing."""

from __future__ import annotations

import numpy as np
import pytest

from tests.pairing.pair_toys import toy_arrays, toy_events
from toprecon.events import Status, components
from toprecon.kinematics import mass
from toprecon.pairing import NeutrinoMethod, PairingOptions, pair
from toprecon.pairing.neutrino import after_photon, neutrino_momentum, w_mass_roots


def massless(px, py, pz):
    return np.array([[np.sqrt(px**2 + py**2 + pz**2)], [px], [py], [pz]])


def test_roots_of_a_worked_example():
    # solved by hand from (p_l + p_nu)^2 = 80.379^2
    lepton = massless(40.0, 20.0, 30.0)
    roots = w_mass_roots(lepton, np.array([30.0]), np.array([-10.0]), 80.379)
    assert np.allclose(np.concatenate(roots), [170.809293, -43.897538], atol=1e-6)
    for root in roots:
        assert np.allclose(mass(lepton + massless(30.0, -10.0, root[0])), 80.379)


def test_complex_roots_become_their_real_part():
    lepton = massless(80.0, 0.0, 30.0)
    one, two = w_mass_roots(lepton, np.array([-80.0]), np.array([0.0]), 80.379)
    assert one == two
    mu = 0.5 * 80.379**2 - 6400
    assert one[0] == pytest.approx(mu * 30 / 6400)


@pytest.mark.parametrize("direction", [1.0, -1.0])
def test_a_photon_along_the_beam_is_found(direction):
    lepton = massless(40.0, 20.0, 30.0)
    nu = massless(30.0, -10.0, -43.897538)
    photon = massless(0.0, 0.0, direction * 25.0)
    assert np.allclose(after_photon(lepton, nu + photon, 80.379), nu, atol=1e-5)


def test_without_missing_mass_there_is_no_photon():
    lepton, missing = massless(40.0, 20.0, 30.0), massless(30.0, -10.0, 5.0)
    missing[0] -= 3.0
    expected = neutrino_momentum(lepton, missing, NeutrinoMethod.MISSING, 80.379)
    assert np.allclose(after_photon(lepton, missing, 80.379), expected)


def test_the_pairing_takes_the_root_nearer_to_the_missing_momentum():
    events = toy_events(toy_arrays())
    missing = components(pair(events).neutrino)
    nu = components(
        pair(events, PairingOptions(neutrino={"method": "w_mass"})).neutrino
    )
    roots = np.array(w_mass_roots(components(events.leptons[:, 0]), *nu[1:3], 80.379))
    nearest = np.argmin(abs(roots - missing[3]), axis=0)
    assert np.allclose(nu[3], np.take_along_axis(roots, nearest[None], axis=0)[0])
    assert set(nearest) == {0, 1}


@pytest.mark.parametrize("method", ["w_mass", "isr", "missing"])
def test_a_lepton_along_the_beam_or_nothing_missing_gives_no_error(method):
    arrays = toy_arrays()
    arrays["lepton"][1:3, 0] = 0.0
    tops = pair(toy_events(arrays), PairingOptions(neutrino={"method": method}))
    assert (tops.status[0] == Status.NO_NEUTRINO) == (method == "w_mass")
    assert (np.asarray(tops.status[1:]) == Status.OK).all()
