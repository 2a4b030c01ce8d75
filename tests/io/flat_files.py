"""Small flat files with columns one can break."""

from __future__ import annotations

import awkward as ak
import numpy as np
import uproot

from toprecon.io import FileLayout

P4 = ("E", "px", "py", "pz")
LAYOUT = FileLayout(
    name="flat",
    event={"number": "number", "weight": "weight", "sqrt_s": 500.0},
    jets={c: f"jet_{c}" for c in P4} | {"btag": "jet_btag"},
    leptons={c: f"lep_{c}" for c in P4} | {"pdg": "lep_pdg"},
    truth={name: {c: f"{name}_{c}" for c in P4} for name in ("top", "antitop")},
)


def columns(n=8, n_jets=4, seed=1):
    """Good columns of n events: massless jets and leptons, a pair at rest energy."""
    rng = np.random.default_rng(seed)

    def objects(k):
        p = rng.normal(0, 40, (3, n, k))
        return np.stack([np.sqrt((p**2).sum(axis=0)), *p])

    out = {"number": np.arange(n), "weight": np.ones(n)}
    jets, leptons = objects(n_jets), objects(1)
    for i, c in enumerate(P4):
        out[f"jet_{c}"] = jets[i]
        out[f"lep_{c}"] = leptons[i]
    out["jet_btag"] = rng.uniform(0, 1, (n, n_jets))
    out["lep_pdg"] = np.full((n, 1), 13)
    top = rng.normal(0, 100, (3, n))
    energy = np.sqrt((top**2).sum(axis=0) + 172.5**2)
    for name, sign in (("top", 1), ("antitop", -1)):
        out[f"{name}_E"] = energy
        for i, c in enumerate(P4[1:]):
            out[f"{name}_{c}"] = sign * top[i]
    return out


def write(path, data, tree="events"):
    """Write columns; two-dimensional ones and lists become ragged."""
    arrays = {}
    for name, values in data.items():
        if isinstance(values, np.ndarray) and values.ndim == 1:
            arrays[name] = values
        else:
            arrays[name] = ak.from_regular(ak.Array(values), axis=None)
    types = {
        name: v.dtype
        if isinstance(v, np.ndarray)
        else f"var * {v.layout.content.dtype}"
        for name, v in arrays.items()
    }
    with uproot.recreate(path) as file:
        file.mktree(tree, types).extend(arrays)
    return path
