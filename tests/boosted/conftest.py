"""Event files with particles, read once."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.require import require
from toprecon.generation import GenerationOptions, generate
from toprecon.io import open_events

LAYOUT = Path(__file__).parents[1] / "io" / "layouts" / "showered.toml"


@pytest.fixture(scope="session")
def showered(event_data):
    """Reader of showered events by name; each file is read once."""
    cache = {}

    def read(name):
        if name not in cache:
            path = event_data / "showered" / f"{name}.root"
            cache[name] = open_events(path, layout=LAYOUT).read()
        return cache[name]

    return read


def boosted_sample(n, *, seed, **settings):
    """Freshly showered events at 1.4 TeV, with particles."""
    require("pythia8mc")
    options = GenerationOptions(
        simulation="shower",
        sqrt_s=1400.0,
        minimum_sqrt_s_prime=1000.0,
        keep_particles=True,
        **settings,
    )
    return generate(n, options, seed=seed)


@pytest.fixture(scope="session")
def quark_pairs():
    """Background: 1500 pairs of light quarks."""
    return boosted_sample(
        1500, seed=11, process="qq", helicity="MIXED", preselect=False
    )
