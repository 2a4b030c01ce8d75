"""Events with jets and a lepton in random directions, for properties of the pairing."""

from __future__ import annotations

import numpy as np

from toprecon.events import Sample, make_events, momenta


def toy_momenta(rng, shape, size=60.0):
    """Nearly massless momenta, shape (4, *shape)."""
    p = size * rng.normal(size=(3, *shape))
    mass = rng.uniform(1, 10, size=shape)
    return np.concatenate([np.sqrt((p**2).sum(axis=0) + mass**2)[None], p])


def toy_arrays(n=40, n_jets=4, seed=3):
    """Jets (4, n, n_jets), their numbers, lepton momentum and charge."""
    rng = np.random.default_rng(seed)
    return {
        "jets": toy_momenta(rng, (n, n_jets)),
        "btag": rng.uniform(size=(n, n_jets)),
        "vertex_charge": rng.integers(-2, 3, size=(n, n_jets)).astype(float),
        "track_charge": rng.normal(scale=0.3, size=(n, n_jets)),
        "lepton": toy_momenta(rng, (n,)),
        "charge": rng.choice([-1.0, 1.0], size=n),
    }


def toy_events(arrays, *, n_leptons=1):
    """Events from such arrays."""
    n, n_jets = arrays["btag"].shape
    jets = momenta(
        arrays["jets"].reshape(4, -1),
        np.full(n, n_jets),
        **{
            name: arrays[name].reshape(-1)
            for name in ("btag", "vertex_charge", "track_charge")
        },
    )
    lepton, charge = arrays["lepton"], arrays["charge"]
    if not n_leptons:
        lepton, charge = lepton[:, :0], charge[:0]
    fields = {
        "jets": jets,
        "leptons": momenta(lepton, np.full(n, n_leptons), charge=charge),
        "weight": np.ones(n),
        "sample": np.zeros(n, np.int16),
        "helicity": np.full(n, -1, np.int8),
        "sqrt_s": np.full(n, 500.0),
        "id": np.arange(n, dtype=np.uint64),
    }
    return make_events(fields, (Sample("toy"),))
