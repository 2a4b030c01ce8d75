"""EDM4hep files for tests, in every convention, made of Events."""

from __future__ import annotations

import awkward as ak
import numpy as np
import uproot

from toprecon.io.collection_ids import collection_id

CONVENTIONS = ("tree", "old tree", "ntuple")
"""A TTree with relations by name, one with relations by position, an RNTuple."""

POSITIONS = {
    ("MCParticles", "parents"): 0,
    ("MCParticles", "daughters"): 1,
    ("Jets", "particles"): 2,
    ("PandoraPFOs", "particles"): 2,
}
F4, F8 = np.float32, np.float64


def ragged(values, counts, kind):
    """Values of all events as a ragged array of one type."""
    return ak.unflatten(np.asarray(values, dtype=kind), np.asarray(counts))


def reco(objects, charge, pdg=0):
    """Members of reconstructed particles."""
    counts = ak.num(objects)
    flat = ak.flatten(objects)
    n = len(flat)
    px, py, pz, e = (ak.to_numpy(flat[c]) for c in ("px", "py", "pz", "E"))
    mass = np.sqrt(np.maximum(e**2 - px**2 - py**2 - pz**2, 0))
    return {
        "PDG": ragged(np.broadcast_to(pdg, n), counts, np.int32),
        "energy": ragged(e, counts, F4),
        "momentum.x": ragged(px, counts, F4),
        "momentum.y": ragged(py, counts, F4),
        "momentum.z": ragged(pz, counts, F4),
        "charge": ragged(np.broadcast_to(charge, n), counts, F4),
        "mass": ragged(mass, counts, F4),
    }


def from_events(events, numbers, *, beams=True, copies=1):
    """Collections that hold Events: (members, relations, vectors) by name.

    ``copies`` repeats the tops and Ws, as a generator does when they radiate.
    """
    n = len(events)
    one = np.ones(n, dtype=np.int64)
    jets = events.jets
    out = {
        "EventHeader": (
            {
                "eventNumber": ragged(numbers, one, np.uint64),
                "runNumber": ragged(np.zeros(n), one, np.uint32),
                "weight": ragged(events.weight, one, F8),
            },
            {},
            {},
        ),
        "IsolatedLeptons": (
            reco(
                events.leptons,
                ak.to_numpy(ak.flatten(events.leptons.charge)),
                ak.to_numpy(ak.flatten(events.leptons.pdg)),
            ),
            {},
            {},
        ),
        "MissingET": (reco(ak.unflatten(events.missing, one), 0.0), {}, {}),
        "MCParticles": generated(events, beams=beams, copies=copies),
        "RefinedJetTag_B": identification(jets, likelihood=jets.btag, pdg=5),
        "JetCharges": identification(
            jets, parameters=[jets.track_charge, jets.vertex_charge]
        ),
    }
    members = reco(jets, 0.0)
    relations = {}
    if "particles" in events.fields:
        particles = events.particles
        order = ak.argsort(
            ak.where(particles.jet_index < 0, 999, particles.jet_index), stable=True
        )
        sizes = [
            ak.to_numpy(ak.sum(particles.jet_index == j, axis=1))
            for j in range(int(ak.max(ak.num(jets))))
        ]
        ends = np.cumsum(np.stack(sizes, axis=1), axis=1)
        assigned = order[
            ak.local_index(order) < ak.from_regular(ends[:, -1:], axis=1)[:, 0]
        ]
        counts = ak.num(jets)
        mask = np.arange(ends.shape[1]) < ak.to_numpy(counts)[:, None]
        begin = ends - np.stack(sizes, axis=1)
        members["particles_begin"] = ragged(begin[mask], counts, np.uint32)
        members["particles_end"] = ragged(ends[mask], counts, np.uint32)
        relations["particles"] = (assigned, "PandoraPFOs")
        codes = np.array([211, 22, 2112, 11, 13])
        kind = ak.to_numpy(ak.flatten(particles.kind))
        charge = ak.to_numpy(ak.flatten(particles.charge))
        sign = np.where((kind >= 3) & (charge > 0), -1, 1)
        out["PandoraPFOs"] = (reco(particles, charge, sign * codes[kind]), {}, {})
    out["Jets"] = (members, relations, {})
    return out


def identification(jets, *, likelihood=None, pdg=0, parameters=()):
    """One identification per jet."""
    counts = ak.num(jets)
    n = int(ak.sum(counts))
    local = ak.local_index(jets.E)
    k = len(parameters)
    values = np.zeros(n) if likelihood is None else ak.flatten(likelihood)
    members = {
        "type": ragged(np.zeros(n), counts, np.int32),
        "PDG": ragged(np.full(n, pdg), counts, np.int32),
        "algorithmType": ragged(np.zeros(n), counts, np.int32),
        "likelihood": ragged(values, counts, F4),
        "parameters_begin": ragged(k * ak.flatten(local), counts, np.uint32),
        "parameters_end": ragged(k * ak.flatten(local) + k, counts, np.uint32),
    }
    stored = (
        np.stack([ak.to_numpy(ak.flatten(x)) for x in parameters], axis=1).ravel()
        if k
        else np.zeros(0)
    )
    vectors = {"parameters": ragged(stored, k * counts, F4)}
    return members, {"particle": (local, "Jets")}, vectors


def generated(events, *, beams=True, copies=1):
    """Generated particles with both relations; copies of tops and Ws on request."""
    truth = events.truth
    n = len(events)
    rows = []  # (momentum, code, parents)
    half = ak.to_numpy(events.sqrt_s) / 2
    zero = np.zeros(n)
    if beams:
        for code, sign in ((11, 1), (-11, -1)):
            p = np.stack([half, zero, zero, sign * half])
            rows.append((p, np.full(n, code), []))
    names = {"top": 6, "antitop": -6, "w_plus": 24, "w_minus": -24, "b": 5, "bbar": -5}
    last = {}

    def add(name, code, parents):
        p = np.stack([ak.to_numpy(truth[name][c]) for c in ("E", "px", "py", "pz")])
        rows.append((p, code, parents))
        last[name] = len(rows) - 1
        if abs(int(code[0])) in (6, 24):
            for i in range(1, copies):
                # later copies have lost momentum
                rows.append((p * (1 - 0.01 * i), code, [last[name]]))
                last[name] = len(rows) - 1

    start = [0, 1] if beams else []
    for name in ("top", "antitop"):
        add(name, np.full(n, names[name]), start)
    for top, w, b in (("top", "w_plus", "b"), ("antitop", "w_minus", "bbar")):
        add(w, np.full(n, names[w]), [last[top]])
        add(b, np.full(n, names[b]), [last[top]])
        for side in ("up", "down"):
            name = f"{w}_{side}"
            add(name, ak.to_numpy(truth[name].pdg), [last[w]])
    k = len(rows)
    counts = np.full(n, k)
    daughters = [[j for j, row in enumerate(rows) if i in row[2]] for i in range(k)]
    parents = [row[2] for row in rows]
    p = np.stack([row[0] for row in rows], axis=2)  # (4, E, k)
    square = p[0] ** 2 - p[1] ** 2 - p[2] ** 2 - p[3] ** 2
    members = {
        "PDG": ragged(np.stack([r[1] for r in rows], axis=1).ravel(), counts, np.int32),
        "generatorStatus": ragged(np.ones(n * k), counts, np.int32),
        "mass": ragged(np.sqrt(np.maximum(square, 0)).ravel(), counts, F8),
        **{
            f"momentum.{axis}": ragged(p[i].ravel(), counts, F8)
            for i, axis in enumerate("xyz", start=1)
        },
    }
    relations = {}
    for name, lists in (("parents", parents), ("daughters", daughters)):
        ends = np.cumsum([len(x) for x in lists])
        begin = ends - [len(x) for x in lists]
        members[f"{name}_begin"] = ragged(np.tile(begin, n), counts, np.uint32)
        members[f"{name}_end"] = ragged(np.tile(ends, n), counts, np.uint32)
        flat = np.array([i for x in lists for i in x], dtype=np.int64)
        index = ak.unflatten(np.tile(flat, n), np.full(n, len(flat)))
        relations[name] = (index, "MCParticles")
    return members, relations, {}


def write(path, collections, convention="tree", subsets=()):
    """Write collections; ``subsets`` maps names to (indices, collection)."""
    columns = {}
    for name, (members, relations, vectors) in collections.items():
        for member, values in members.items():
            old = convention == "old tree" and "energy" in members
            stored = "type" if old and member == "PDG" else member
            columns[f"{name}.{stored}"] = values
        for relation, (index, target) in relations.items():
            columns |= link(name, relation, index, target, convention)
        for vector, values in vectors.items():
            old = convention == "old tree"
            columns[f"{name}_0" if old else f"_{name}_{vector}"] = values
    for name, (index, target) in dict(subsets).items():
        old = convention == "old tree"
        branch = f"{name}#0" if old else f"{name}_objIdx"
        columns |= object_ids(branch, index, target, old)
    with uproot.recreate(path) as file:
        if convention == "ntuple":
            nested = nest(columns)
            file["events"] = nested
        else:
            types = {name: f"var * {kind_of(v)}" for name, v in columns.items()}
            file.mktree("events", types).extend(columns)
    return path


def link(name, relation, index, target, convention):
    """Columns of a relation."""
    position = POSITIONS.get((name, relation))
    if convention == "old tree" and position is not None:
        return object_ids(f"{name}#{position}", index, target, True)
    return object_ids(f"_{name}_{relation}", index, target, False)


def object_ids(branch, index, target, old):
    """Columns of a list of object identities."""
    counts = ak.num(index)
    flat = ak.flatten(index)
    number = 7 if old else collection_id(target)
    kind = np.int32 if old else np.uint32
    return {
        f"{branch}.index": ragged(flat, counts, np.int32),
        f"{branch}.collectionID": ragged(np.full(len(flat), number), counts, kind),
    }


def kind_of(values):
    """Type of the numbers of a ragged array."""
    return str(ak.to_numpy(ak.flatten(values)).dtype)


def nest(columns):
    """One column per collection, with nested records, as an RNTuple has."""
    groups = {}
    for name, values in columns.items():
        collection, _, member = name.partition(".")
        groups.setdefault(collection, {})[member] = values
    out = {}
    for collection, members in groups.items():
        if set(members) == {""}:
            out[collection] = members[""]
            continue
        vectors = {m: v for m, v in members.items() if "." in m}
        plain = {m: v for m, v in members.items() if "." not in m}
        for name in sorted({m.split(".")[0] for m in vectors}):
            plain[name] = ak.zip(
                {m.split(".")[1]: v for m, v in vectors.items() if m.startswith(name)}
            )
        out[collection] = ak.zip(plain, depth_limit=2)
    return out
