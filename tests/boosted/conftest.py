"""Event files with particles, read once."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from tests.boosted.showers import quark_pair_events
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


@pytest.fixture(scope="session")
def quark_pairs():
    """Background: e+e- to light quarks and b quarks at 1.4 TeV, showered here."""
    return quark_pair_events(600, seed=11)


@pytest.fixture
def toy_rng():
    return np.random.default_rng(7)
