"""Skip without an optional package, but refuse to skip where all is required."""

from __future__ import annotations

import importlib
import os

import pytest


def require(name):
    """Import a module, or skip; fail instead if TOPRECON_REQUIRE_ALL=1."""
    try:
        return importlib.import_module(name)
    except ImportError:
        if os.environ.get("TOPRECON_REQUIRE_ALL") == "1":
            pytest.fail(f"{name} is required here, but is not installed")
        pytest.skip(f"{name} is not installed")
