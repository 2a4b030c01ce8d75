"""Events whose quarks fly where they are told."""

from __future__ import annotations

import awkward as ak
import numpy as np

from toprecon.events import TRUTH_MOMENTA, Sample, make_events, momenta

QUARKS = ("b", "w_plus_up", "w_plus_down", "bbar", "w_minus_up", "w_minus_down")
PDG = {
    "hadronic": {
        "w_plus_up": 2,
        "w_plus_down": -1,
        "w_minus_up": -2,
        "w_minus_down": 1,
    },
    "electron": {"up": 12, "down": 11},
    "muon": {"up": 14, "down": 13},
    "tau": {"up": 16, "down": 15},
}


def directions(rng, n):
    """Massless momenta of 50 GeV in random directions, shape (4, n)."""
    p = rng.normal(size=(3, n))
    p /= np.sqrt((p**2).sum(axis=0))
    return 50 * np.vstack([np.ones(n), p])


def smeared(p, rng, size):
    """Directions moved a little, energies kept."""
    moved = p[1:] + 50 * size * rng.normal(size=p[1:].shape)
    moved *= 50 / np.sqrt((moved**2).sum(axis=0))
    return np.vstack([p[:1], moved])


def pdg_of(w_plus, w_minus):
    """Particle numbers of the four fermions, for decays named like ``"muon"``."""
    out = {}
    for side, kind, sign in (("w_plus", w_plus, 1), ("w_minus", w_minus, -1)):
        for place in ("up", "down"):
            name = f"{side}_{place}"
            if kind == "hadronic":
                out[name] = PDG["hadronic"][name]
            else:
                # W+ -> nu l+: the charged antilepton is "down"
                flip = -1 if place == "down" else 1
                out[name] = sign * flip * PDG[kind][place]
    return out


def pair_events(
    n,
    *,
    seed=1,
    w_plus="hadronic",
    w_minus="muon",
    extra=0,
    smear=0.02,
    order=None,
    stored_mass=None,
):
    """Events with one jet per quark, in the order of ``order``, and extra jets.

    ``order[k]`` is the place of the jet of the k-th quark of the decays asked for.
    """
    rng = np.random.default_rng(seed)
    p = {name: directions(rng, n) for name in QUARKS}
    p["w_plus"] = p["w_plus_up"] + p["w_plus_down"]
    p["w_minus"] = p["w_minus_up"] + p["w_minus_down"]
    p["top"], p["antitop"] = p["b"] + p["w_plus"], p["bbar"] + p["w_minus"]
    numbers = pdg_of(w_plus, w_minus)
    truth = {
        name: momenta(
            p[name], **({"pdg": np.full(n, numbers[name])} if name in numbers else {})
        )
        for name in TRUTH_MOMENTA
    }
    if stored_mass is not None:
        truth["sqrt_s_prime"] = np.full(n, stored_mass)
    quarks = [name for name in QUARKS if name not in numbers or abs(numbers[name]) < 10]
    n_jets = len(quarks) + extra
    order = list(range(len(quarks))) if order is None else list(order)
    jets = np.stack([directions(rng, n) for _ in range(n_jets)], axis=2)
    for quark, place in zip(quarks, order, strict=True):
        jets[:, :, place] = smeared(p[quark], rng, smear)
    fields = {
        "jets": momenta(
            jets.reshape(4, -1), np.full(n, n_jets), btag=np.zeros(n * n_jets)
        ),
        "leptons": momenta(np.zeros((4, 0)), np.zeros(n, int), charge=np.zeros(0)),
        "weight": np.ones(n),
        "sample": np.zeros(n, np.int16),
        "helicity": np.full(n, -1, np.int8),
        "sqrt_s": np.full(n, 500.0),
        "id": np.arange(n, dtype=np.uint64),
        "truth": ak.zip(truth, depth_limit=1),
    }
    return make_events(fields, (Sample("toy"),))


def without_truth(events, rows):
    """Events in which some rows have no generated pair."""
    truth = events.truth
    gone = np.zeros(len(events), bool)
    gone[rows] = True
    fields = {}
    for name in truth.fields:
        record = truth[name]
        if not record.fields:
            fields[name] = ak.where(gone, np.nan, record)
            continue
        p = np.array([ak.to_numpy(record[c]) for c in ("E", "px", "py", "pz")])
        p[:, gone] = np.nan
        extra = {"pdg": np.where(gone, 0, record.pdg)} if "pdg" in record.fields else {}
        fields[name] = momenta(p, **extra)
    return ak.with_field(events, ak.zip(fields, depth_limit=1), "truth")
