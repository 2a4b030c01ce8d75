from __future__ import annotations

import math

import numpy as np
import pytest

from tests.truth.toys import pair_events, without_truth
from toprecon.errors import OptionError
from toprecon.events import Channel, components
from toprecon.kinematics import mass
from toprecon.truth import TruthOptions, signal_region, sqrt_s_prime

ALL = Channel.ALL_HADRONIC


@pytest.mark.parametrize(
    ("w_plus", "w_minus", "lepton_jets", "all_hadronic"),
    [
        ("hadronic", "electron", True, False),
        ("hadronic", "muon", True, False),
        ("muon", "hadronic", True, False),
        ("hadronic", "tau", False, False),  # whatever the tau decays to
        ("tau", "hadronic", False, False),
        ("hadronic", "hadronic", False, True),
        ("electron", "muon", False, False),
    ],
)
def test_the_phase_space_is_that_of_the_channel(
    w_plus, w_minus, lepton_jets, all_hadronic
):
    events = pair_events(3, w_plus=w_plus, w_minus=w_minus)
    assert signal_region(events).tolist() == [lepton_jets] * 3
    assert signal_region(events, channel=ALL).tolist() == [all_hadronic] * 3


def test_the_lowest_mass_is_included():
    events = pair_events(2, stored_mass=400.0)
    for limit, inside in ((400.0, True), (math.nextafter(400, 500), False)):
        options = TruthOptions(minimum_sqrt_s_prime=limit)
        assert signal_region(events, options).tolist() == [inside] * 2


def test_the_stored_mass_comes_before_that_of_the_pair():
    assert sqrt_s_prime(pair_events(2, stored_mass=400.0)).tolist() == [400.0] * 2
    events = pair_events(2)
    pair = components(events.truth.top) + components(events.truth.antitop)
    assert np.array_equal(sqrt_s_prime(events), mass(pair))
    unknown = pair_events(2, stored_mass=math.nan)
    assert np.array_equal(sqrt_s_prime(unknown), mass(pair))


def test_without_truth_nothing_is_signal():
    events = without_truth(pair_events(3, stored_mass=400.0), [1])
    assert signal_region(events).tolist() == [True, False, True]
    assert np.isnan(sqrt_s_prime(events)).tolist() == [False, True, False]
    bare = events[[name for name in events.fields if name != "truth"]]
    assert signal_region(bare).tolist() == [False] * 3
    assert signal_region(events[:0]).shape == (0,)


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"match_angle": 0}, "match_angle: must be > 0 rad; got 0"),
        ({"match_angle": 4}, "match_angle: must be <= 3.2 rad; got 4"),
        ({"minimum_sqrt_s_prime": -1}, "minimum_sqrt_s_prime: must be >= 0 GeV; got"),
    ],
)
def test_wrong_settings_are_refused(settings, message):
    with pytest.raises(OptionError, match=message):
        TruthOptions(**settings)
