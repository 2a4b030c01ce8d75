"""Speed of the pairing engine beside the idiomatic columnar way, in one run."""

from __future__ import annotations

import statistics
import time

import awkward as ak
import numpy as np
import pytest
import vector

from tests.pairing.pair_toys import toy_arrays
from toprecon.events import Channel
from toprecon.pairing import PairingOptions
from toprecon.pairing.engine import Group, evaluate
from toprecon.pairing.hypotheses import hypotheses
from toprecon.pairing.terms import terms_of

N, N_SLOW = 50_000, 4_000
BARS = {Channel.LEPTON_JETS: 15, Channel.ALL_HADRONIC: 20}


def every_term():
    options = PairingOptions(tags="ignore")
    for term in options.terms:
        options = options.with_term(term.name, on=True)
    return options


def side(b, w, terms, names):
    """Chi-square of a side with vectors; boosts give the b momentum."""
    top = b + w
    values = (
        w.mass,
        top.mass,
        top.E,
        b.boostCM_of(top).mag,
        np.cos(b.deltaangle(w)),
    )
    chi2 = 0.0
    for name, value in zip(names, values, strict=True):
        term = terms[name]
        difference = value - term.target[0]
        resolution = ak.where(difference < 0, term.below, term.above)
        chi2 = chi2 + (difference * resolution) ** 2
    return chi2


def columnar(jets, lepton, neutrino, table, terms):
    """Static table of indices, one record array of four-vectors per role."""
    names = list(terms)
    roles = [jets[:, table.assignments[:, k]] for k in range(4)]
    first = side(roles[0], roles[1] + roles[2], terms, names[:5])
    if table.is_leptonic:
        w = (lepton + neutrino)[:, np.newaxis]
        chi2 = first + side(roles[3], w, terms, names[5:])
    else:
        w = jets[:, table.assignments[:, 4]] + jets[:, table.assignments[:, 5]]
        chi2 = first + side(roles[3], w, terms, names[5:])
    return ak.argmin(chi2, axis=1), ak.min(chi2, axis=1)


def record(p):
    """Record of four-vectors from an array of shape (4, ...)."""
    parts = dict(zip(("E", "px", "py", "pz"), map(ak.from_numpy, p), strict=True))
    return ak.zip(parts, with_name="Momentum4D")


def median_seconds(functions, rounds=5):
    """Median time of each, interleaved."""
    times = [[] for _ in functions]
    for _ in range(rounds):
        for function, seen in zip(functions, times, strict=True):
            start = time.perf_counter()
            function()
            seen.append(time.perf_counter() - start)
    return [statistics.median(seen) for seen in times]


@pytest.mark.benchmark
@pytest.mark.parametrize("channel", list(BARS))
def test_the_engine_is_many_times_as_fast_as_the_columnar_way(channel, record_property):
    vector.register_awkward()
    n_jets = 4 if channel is Channel.LEPTON_JETS else 6
    arrays = toy_arrays(n=N, n_jets=n_jets)
    momenta = arrays["jets"]
    neutrino = toy_arrays(n=N, seed=5)["lepton"]
    table = hypotheses(channel, n_jets)
    terms = terms_of(every_term(), np.full(N, 500.0))
    if channel is Channel.ALL_HADRONIC:
        # the columnar way names both sides; the engine takes the hadronic terms twice
        names = list(terms)
        terms = {**terms, **dict(zip(names[5:], list(terms.values())[:5], strict=True))}
    group = Group(
        np.ascontiguousarray(momenta.transpose(0, 2, 1)), arrays["lepton"], neutrino
    )
    jets = record(momenta[:, :N_SLOW])
    lepton, nu = record(arrays["lepton"][:, :N_SLOW]), record(neutrino[:, :N_SLOW])

    def fast():
        return evaluate(group, table, terms, with_share=False)

    def slow():
        return columnar(jets, lepton, nu, table, terms)

    best, chi2 = slow()
    scores = fast()
    assert np.allclose(scores.chi2[:N_SLOW], chi2, rtol=1e-6)
    assert (scores.best[:N_SLOW] == ak.to_numpy(best)).mean() > 0.999
    quick, idiomatic = median_seconds([fast, slow])
    ratio = (idiomatic / N_SLOW) / (quick / N)
    record_property("events_per_second", N / quick)
    record_property("ratio", ratio)
    print(
        f"\n{channel.value}: {N / quick / 1e6:.2f} M events/s, {ratio:.0f} x columnar"
    )
    assert ratio >= BARS[channel]
