"""Fixtures shared by all tests."""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, settings

from tests.samples import SAMPLES

settings.register_profile(
    "dev", max_examples=25, deadline=None, suppress_health_check=[HealthCheck.too_slow]
)
settings.register_profile("ci", parent=settings.get_profile("dev"), max_examples=100)
settings.load_profile("ci" if os.environ.get("CI") else "dev")

REQUIRE_ALL = os.environ.get("TOPRECON_REQUIRE_ALL") == "1"


def pytest_collection_modifyitems(config, items):
    """Leave out what is off by default unless it was asked for by name."""
    expression = config.getoption("-m") or ""
    for marker in ("soak", "benchmark"):
        if marker not in expression:
            skipped = [item for item in items if item.get_closest_marker(marker)]
            config.hook.pytest_deselected(items=skipped)
            items[:] = [item for item in items if item not in skipped]


@pytest.fixture
def rng():
    """Random numbers with a fixed seed."""
    return np.random.default_rng(20261201)


@pytest.fixture(scope="session")
def event_data():
    """Folder with event files written by others (TOPRECON_EVENT_DATA)."""
    folder = os.environ.get("TOPRECON_EVENT_DATA")
    if folder and Path(folder).is_dir():
        return Path(folder).resolve()
    if REQUIRE_ALL:
        pytest.fail("TOPRECON_EVENT_DATA must name the folder with the event files")
    pytest.skip("TOPRECON_EVENT_DATA names no folder with event files")


@pytest.fixture(scope="session")
def sample_folder():
    """The sample events of the repository."""
    return SAMPLES
