"""Small fat jets and events with the answer known by construction."""

from __future__ import annotations

import numpy as np

from toprecon.events import Helicity, Sample, make_events, momenta, record_of


def prongs(energies, directions):
    """Massless particles with given energies and directions, shape (4, K)."""
    u = np.asarray(directions, dtype=float).T
    u /= np.sqrt(np.sum(u**2, axis=0))
    e = np.asarray(energies, dtype=float)
    return np.concatenate([e[None], e * u])


def narrow_jets(rng, counts, width=1e-3):
    """Massless particles close to the x axis: pt is E and distance is opening angle."""
    n = int(np.sum(counts))
    offsets = rng.normal(size=(n, 2)) * width
    return prongs(rng.exponential(10.0, size=n), np.column_stack([np.ones(n), offsets]))


def wide_jet(rng, n, width=0.4):
    """One jet of n massless particles around the z axis, shape (4, n)."""
    offsets = rng.normal(size=(n, 2)) * width
    return prongs(rng.exponential(10.0, size=n), np.column_stack([offsets, np.ones(n)]))


def three_prong_top(direction, energy=700.0, *, m_top=172.5, m_w=80.379, phi=0.3):
    """b, q, q of a top that decays at right angles to its flight, shape (4, 3)."""
    from toprecon.kinematics import from_rest_frame

    direction = np.asarray(direction, dtype=float)
    direction = direction / np.linalg.norm(direction)
    side = np.cross(direction, [0.3, -0.5, 0.8])
    side /= np.linalg.norm(side)
    p = (m_top**2 - m_w**2) / (2 * m_top)
    b = np.concatenate([[p], p * side])
    w = np.concatenate([[np.hypot(p, m_w)], -p * side])
    axis = np.cos(phi) * direction + np.sin(phi) * np.cross(direction, side)
    q = 0.5 * m_w * np.concatenate([[1.0], axis])
    quarks = np.stack([q, 0.5 * m_w * np.concatenate([[1.0], -axis])], axis=1)
    quarks = from_rest_frame(quarks, w[:, None])
    top = np.concatenate([[energy], np.sqrt(energy**2 - m_top**2) * direction])
    return from_rest_frame(np.concatenate([b[:, None], quarks], axis=1), top[:, None])


def nothing(n):
    """Missing momenta, shape (4, n)."""
    return np.full((4, n), np.nan)


def make_toy_events(particles, *, leptons=None, jets=None, truth=None, sqrt_s=1400.0):
    """Events from one list entry per event.

    ``particles``: arrays (4, K), optionally with rows of charge, kind, jet_index below;
    ``leptons``: arrays (5, L) with the charge last; ``jets``: arrays (6, J) with btag
    and vertex charge last; ``truth``: dict of arrays (4, E), and pdg of the W products.
    """
    n = len(particles)
    full = [np.concatenate([p, np.zeros((3, p.shape[1]))])[:7] for p in particles]
    flat = np.concatenate(full, axis=1)
    counts = [p.shape[1] for p in particles]
    leptons = leptons or [np.zeros((5, 0))] * n
    jets = jets or [np.zeros((6, 0))] * n
    lep, jet = np.concatenate(leptons, axis=1), np.concatenate(jets, axis=1)
    fields = {
        "jets": momenta(
            jet[:4],
            [j.shape[1] for j in jets],
            btag=jet[4],
            vertex_charge=jet[5],
            track_charge=jet[5],
        ),
        "leptons": momenta(
            lep[:4],
            [x.shape[1] for x in leptons],
            charge=lep[4],
            pdg=np.where(lep[4] > 0, -13, 13),
            isolation=np.zeros(lep.shape[1]),
        ),
        "particles": momenta(
            flat[:4],
            counts,
            charge=flat[4],
            kind=flat[5].astype(int),
            jet_index=flat[6].astype(int),
        ),
        "weight": np.ones(n),
        "sample": np.zeros(n, dtype=np.int16),
        "helicity": np.full(n, -1, dtype=np.int8),
        "sqrt_s": np.full(n, sqrt_s),
        "id": np.arange(n, dtype=np.uint64),
    }
    if truth is not None:
        columns = {}
        for name, value in truth.items():
            p, extra = value if isinstance(value, tuple) else (value, {})
            columns[name] = momenta(np.asarray(p, dtype=float), **extra)
        columns["sqrt_s_prime"] = np.full(n, sqrt_s)
        fields["truth"] = record_of(columns)
    return make_events(fields, [Sample("toy", helicity=Helicity.LR, sqrt_s=sqrt_s)])


def toy_pair(charge=-1.0, *, energy=700.0):
    """One lepton+jets event: hadronic fat jet along +x, b, lepton, neutrino along -x.

    A negative lepton makes the hadronic side the top.
    """
    hadronic = three_prong_top([1.0, 0.0, 0.2], energy)
    leptonic = three_prong_top([-1.0, 0.0, -0.2], energy)
    b, lepton = leptonic[:, :1], leptonic[:, 1]
    return np.concatenate([hadronic, b], axis=1), np.append(lepton, charge)[:, None]
