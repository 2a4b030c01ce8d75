"""Events and a strict desk without a kernel."""

from __future__ import annotations

import ipywidgets
import pytest

import toprecon
from toprecon.study import StudyPlan
from toprecon.widgets import Desk

PLAN = StudyPlan().with_cut("pairing.chi2", high=40)


@pytest.fixture(scope="session")
def events():
    return toprecon.generate(3000, seed=7)


@pytest.fixture(autouse=True)
def strict(monkeypatch, tmp_path):
    """Errors that nobody foresaw are raised; files land in a folder of the test."""
    monkeypatch.setenv("TOPRECON_STRICT", "1")
    monkeypatch.chdir(tmp_path)


@pytest.fixture
def desk(events):
    desk = Desk(events, PLAN, synchronous=True)
    yield desk
    desk.close()


@pytest.fixture
def alive():
    """Number of widgets beyond those alive when the test began."""
    known = set(ipywidgets.widgets.widget._instances)
    return lambda: len(set(ipywidgets.widgets.widget._instances) - known)
