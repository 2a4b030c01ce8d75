"""The compiled engine: the same bits as the numpy one."""

from __future__ import annotations

import sys

import awkward as ak
import numpy as np
import pytest

from tests.pairing.pair_toys import toy_arrays, toy_events
from tests.require import require
from toprecon.errors import MissingPackageError
from toprecon.events import Channel
from toprecon.pairing import PairingOptions, TermName, calibrate, pair
from toprecon.pairing import compiled as compiled_module
from toprecon.pairing.compiled import VARIABLE, compiled_lowest, compiled_table
from toprecon.pairing.engine import Group, chi2_table, two_lowest
from toprecon.pairing.hypotheses import hypotheses
from toprecon.pairing.terms import terms_of

CHANNELS = {Channel.LEPTON_JETS: 4, Channel.ALL_HADRONIC: 6}


@pytest.fixture(autouse=True)
def numba():
    return require("numba")


def with_terms(names):
    options = PairingOptions(tags="ignore")
    for name in TermName:
        options = options.with_term(name, on=name in names)
    return options


@pytest.mark.parametrize("channel", list(CHANNELS))
@pytest.mark.parametrize("extra_jets", [0, 2])
@pytest.mark.parametrize("n", [0, 1, 255, 256, 257, 5001])
def test_sums_are_equal_byte_for_byte(channel, extra_jets, n):
    n_jets = CHANNELS[channel] + extra_jets
    arrays = toy_arrays(n=n, n_jets=n_jets, seed=n)
    rng = np.random.default_rng(1)
    penalties = rng.choice([0.0, 1.5, np.inf], size=(3, n_jets, n))
    jets = np.ascontiguousarray(arrays["jets"].transpose(0, 2, 1))
    group = Group(jets, arrays["lepton"], 0.7 * arrays["lepton"][:, ::-1], *penalties)
    table = hypotheses(channel, n_jets)
    for names in (tuple(TermName), tuple(TermName)[1::2], (TermName.W_MASS,)):
        terms = terms_of(with_terms(names), np.full(n, 500.0))
        for events in (slice(0, n), slice(n // 3, n)):
            one = chi2_table(group, table, terms, events)
            two = compiled_table(group, table, terms, events)
            assert one.tobytes() == two.tobytes()
            for a, b in zip(two_lowest(one), compiled_lowest(two), strict=True):
                assert a.tobytes() == b.tobytes()


def test_degenerate_momenta_are_clamped_alike():
    arrays = toy_arrays(n=8, n_jets=6)
    jets = np.ascontiguousarray(arrays["jets"].transpose(0, 2, 1))
    jets[:, 0] = 0.0
    jets[0, 1] *= 0.2  # negative mass squared
    group = Group(jets, arrays["lepton"], arrays["lepton"])
    for channel in CHANNELS:
        table = hypotheses(channel, 6)
        terms = terms_of(with_terms(tuple(TermName)), np.full(8, 500.0))
        events = slice(0, 8)
        one = chi2_table(group, table, terms, events)
        assert np.isfinite(one).all()
        assert one.tobytes() == compiled_table(group, table, terms, events).tobytes()


@pytest.mark.parametrize("channel", list(CHANNELS))
@pytest.mark.parametrize("score", ["plain", "ratio"])
def test_pairs_are_the_same_whichever_engine(channel, score, monkeypatch):
    n_jets = CHANNELS[channel]
    arrays = toy_arrays(n=900, n_jets=n_jets)
    n_leptons = 1 if channel is Channel.LEPTON_JETS else 0
    events = toy_events(arrays, n_leptons=n_leptons)
    options = PairingOptions()
    if score == "ratio":
        plain = pair(events, PairingOptions(tags="ignore"), channel=channel)
        options = options.calibrated(
            calibrate(
                events,
                ak.to_numpy(plain.assignment),
                PairingOptions(tags="ignore"),
                channel=channel,
                n_components=2,
            ),
            tags="likelihood",
        )
    monkeypatch.delenv(VARIABLE, raising=False)
    one = pair(events, options, channel=channel)
    monkeypatch.setenv(VARIABLE, "1")
    two = pair(events, options, channel=channel)
    for name in ("assignment", "sign", "chi2", "gap", "share", "status"):
        a, b = ak.to_numpy(one[name]), ak.to_numpy(two[name])
        assert a.tobytes() == b.tobytes(), name


def test_numba_that_is_missing_is_said_in_one_sentence(monkeypatch):
    compiled_module._kernels.cache_clear()
    monkeypatch.setitem(sys.modules, "numba", None)
    arrays = toy_arrays(n=3)
    group = Group(arrays["jets"].transpose(0, 2, 1), arrays["lepton"], arrays["lepton"])
    table = hypotheses(Channel.LEPTON_JETS, 4)
    with pytest.raises(MissingPackageError, match="install the extra 'fast'"):
        compiled_table(group, table, {}, slice(0, 3))
