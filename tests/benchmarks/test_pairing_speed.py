"""Speed of the pairing engine beside the idiomatic columnar way, in one run."""

from __future__ import annotations

import math
import statistics
import time

import awkward as ak
import numpy as np
import pytest
import vector

from tests.pairing.pair_toys import toy_arrays
from toprecon.events import Channel
from toprecon.pairing import PairingOptions
from toprecon.pairing.compiled import VARIABLE
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


def plain_loop(numba):
    """One event after the other, every hypothesis by itself: a first compiled try."""

    def chi2_of(b, w, target, below, above):
        top = b + w
        m2 = top[0] ** 2 - top[1] ** 2 - top[2] ** 2 - top[3] ** 2
        mass = math.sqrt(max(m2, 0.0))
        bw = b[0] * w[0] - b[1] * w[1] - b[2] * w[2] - b[3] * w[3]
        mb2 = b[0] ** 2 - b[1] ** 2 - b[2] ** 2 - b[3] ** 2
        mw2 = w[0] ** 2 - w[1] ** 2 - w[2] ** 2 - w[3] ** 2
        rest = math.sqrt(max(bw * bw - mb2 * mw2, 0.0)) / mass
        size = math.sqrt((b[0] ** 2 - mb2) * (w[0] ** 2 - mw2))
        cosine = (b[0] * w[0] - bw) / size
        total = 0.0
        for k, value in enumerate((math.sqrt(mw2), mass, top[0], rest, cosine)):
            d = value - target[k]
            pull = d * (below[k] if d < 0 else above[k])
            total += pull * pull
        return total

    inner = numba.njit(chi2_of)

    def loop(jets, second, assignments, target, below, above, best, chi2):
        for e in range(jets.shape[0]):
            lowest = np.inf
            for row in range(len(assignments)):
                a = assignments[row]
                w = jets[e, a[1]] + jets[e, a[2]]
                total = inner(jets[e, a[0]], w, target[:5], below[:5], above[:5])
                v = second[e] if a[4] < 0 else jets[e, a[4]] + jets[e, a[5]]
                total += inner(jets[e, a[3]], v, target[5:], below[5:], above[5:])
                if total < lowest:
                    lowest, best[e] = total, row
            chi2[e] = lowest

    return numba.njit(loop)


@pytest.mark.benchmark
@pytest.mark.parametrize("channel", list(BARS))
def test_the_compiled_engine_beside_numpy_and_a_compiled_loop(
    channel, record_property, monkeypatch
):
    numba = pytest.importorskip("numba")
    n_jets = 4 if channel is Channel.LEPTON_JETS else 6
    arrays = toy_arrays(n=N, n_jets=n_jets)
    neutrino = toy_arrays(n=N, seed=5)["lepton"]
    table = hypotheses(channel, n_jets)
    terms = terms_of(every_term(), np.full(N, 500.0))
    rows = list(terms.values())
    if channel is Channel.ALL_HADRONIC:
        rows = rows[:5] * 2
    group = Group(
        np.ascontiguousarray(arrays["jets"].transpose(0, 2, 1)),
        arrays["lepton"],
        neutrino,
    )
    jets = np.ascontiguousarray(arrays["jets"].transpose(1, 2, 0))
    second = np.ascontiguousarray((arrays["lepton"] + neutrino).T)
    settings = [
        np.array([term.target[0] for term in rows]),
        np.array([term.below for term in rows]),
        np.array([term.above for term in rows]),
    ]
    best, chi2 = np.zeros(N, np.int64), np.empty(N)
    loop = plain_loop(numba)

    def by_loop():
        loop(jets, second, table.assignments, *settings, best, chi2)

    def by_numpy():
        monkeypatch.delenv(VARIABLE, raising=False)
        return evaluate(group, table, terms, with_share=False)

    def by_compiled():
        monkeypatch.setenv(VARIABLE, "1")
        return evaluate(group, table, terms, with_share=False)

    by_loop()
    one, two = by_numpy(), by_compiled()
    assert one.chi2.tobytes() == two.chi2.tobytes()
    assert np.allclose(one.chi2, chi2, rtol=1e-6)
    assert (one.best == best).mean() > 0.999
    seconds = median_seconds([by_numpy, by_compiled, by_loop], rounds=7)
    speeds = [N / s / 1e6 for s in seconds]
    record_property("million_events_per_second", speeds)
    print(
        f"\n{channel.value}: numpy {speeds[0]:.2f}, compiled {speeds[1]:.2f}, loop "
        f"{speeds[2]:.2f} M events/s"
    )
    assert speeds[1] > speeds[0]
    # numpy blocks need at most 2.5 times as long as a plain compiled loop
    assert speeds[0] > speeds[2] / 2.5


@pytest.mark.benchmark
@pytest.mark.parametrize("channel", list(BARS))
def test_memory_beyond_the_outputs_does_not_grow_with_the_events(channel):
    import tracemalloc

    n_jets = 4 if channel is Channel.LEPTON_JETS else 6
    table = hypotheses(channel, n_jets)
    peaks = []
    for n in (50_000, 400_000):
        arrays = toy_arrays(n=n, n_jets=n_jets)
        terms = terms_of(every_term(), np.full(n, 500.0))
        if channel is Channel.ALL_HADRONIC:
            terms = dict(list(terms.items())[:5])
        jets = np.ascontiguousarray(arrays["jets"].transpose(0, 2, 1))
        group = Group(jets, arrays["lepton"], arrays["lepton"])
        tracemalloc.start()
        evaluate(group, table, terms)
        peaks.append(tracemalloc.get_traced_memory()[1])
        tracemalloc.stop()
    per_event = (peaks[1] - peaks[0]) / 350_000
    fixed = peaks[0] - 50_000 * per_event
    print(f"\n{channel.value}: {per_event:.0f} B per event + {fixed / 1e6:.1f} MB")
    # six outputs of 8 bytes, and one mask
    assert per_event <= 64
    assert fixed <= 16e6
