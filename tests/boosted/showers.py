"""Quark pairs of the same energy as the signal, from a general-purpose generator."""

from __future__ import annotations

import numpy as np

from tests.boosted.toys import make_toy_events
from tests.require import require

_NEUTRINOS = (12, 14, 16)
_DETECTED = 0.998
"""|cos(theta)| below which particles are seen, about that of the signal files."""


def quark_pair_events(n, *, seed, sqrt_s=1400.0, least_mass=1000.0):
    """Events e+e- -> q qbar (five flavours) with radiation and hadronisation."""
    pythia8 = require("pythia8mc")
    generator = pythia8.Pythia("", False)
    for line in (
        "Print:quiet = on",
        "Beams:idA = 11",
        "Beams:idB = -11",
        f"Beams:eCM = {sqrt_s}",
        "WeakSingleBoson:ffbar2gmZ = on",
        f"PhaseSpace:mHatMin = {least_mass}",
        "23:onMode = off",
        "23:onIfAny = 1 2 3 4 5",
        "Random:setSeed = on",
        f"Random:seed = {seed}",
    ):
        generator.readString(line)
    assert generator.init()
    events = []
    while len(events) < n:
        if not generator.next():
            continue
        rows = [
            (p.e(), p.px(), p.py(), p.pz(), p.charge())
            for p in generator.event
            if p.isFinal() and p.idAbs() not in _NEUTRINOS
        ]
        particles = np.array(rows).T
        size = np.sqrt(np.sum(particles[1:4] ** 2, axis=0))
        seen = (np.abs(particles[3]) < _DETECTED * size) & (particles[0] > 0.3)
        events.append(particles[:, seen])
    return make_toy_events(events, sqrt_s=sqrt_s)
