"""The events panel: cut flow, the data-like view and the tail."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from tests.samples import SAMPLES
from toprecon.study import StudyPlan, branch_plan, open_events, reconstruct_source
from toprecon.widgets import EventsPanel

PLAN = StudyPlan().with_settings({"beams.luminosity": 500})


@pytest.fixture(scope="module")
def panel():
    panel = EventsPanel(
        str(SAMPLES / "catalogue.toml"),
        PLAN.with_cut("pairing.chi2", high=15),
        synchronous=True,
    )
    yield panel
    panel.close()


def test_every_view_has_its_picture_sentence_and_code(panel):
    pictures = set()
    for view, words, code in (
        ("cut flow", "", "cut_flow_figure"),
        ("as in data", "expected events by process: lepjets_550", "data_like(table"),
        ("unmatched from the tail", "from truth", "unmatched_from_tail(table"),
    ):
        panel.view.value = view
        assert panel.errors.text == ""
        assert words in panel.text.value
        assert "+-" not in panel.text.value
        assert code in panel.python()
        pictures.add(bytes(panel.picture.widget.value))
        shown = panel.observable.layout.display is None
        assert shown == (view == "as in data")
    assert len(pictures) == 3


def test_any_observable_can_be_shown(panel):
    panel.view.value = "as in data"
    before = bytes(panel.picture.widget.value)
    panel.observable.value = "pairing.chi2"
    assert bytes(panel.picture.widget.value) != before
    assert '"pairing.chi2", beams="plan"' in panel.python()


def test_fat_jets_have_no_tail_of_a_pairing_score():
    path = str(SAMPLES / "lepjets_1500_LR.root")
    panel = EventsPanel(path, branch_plan(PLAN, "boosted"), synchronous=True)
    panel.view.value = "unmatched from the tail"
    assert "choose a branch with it" in panel.text.value
    assert panel.errors.text == ""
    panel.close()


def test_events_without_truth_are_shown_as_in_data_and_the_tail_says_why_not():
    plan = StudyPlan()
    table = reconstruct_source(open_events(SAMPLES / "lepjets_550_LR.root"), plan)
    columns = dict(table.columns)
    columns["is_signal"] = np.zeros(len(table), dtype=bool)
    for name in ("cos_theta_true", "cos_theta_closest", "cos_theta_chosen"):
        columns[name] = np.full(len(table), np.nan)
    blind = dataclasses.replace(table, columns=columns)
    panel = EventsPanel(blind, plan, synchronous=True)
    panel.view.value = "as in data"
    assert "observed A_FB" in panel.text.value
    assert panel.picture.widget.value
    panel.view.value = "unmatched from the tail"
    assert "signal events with truth are required" in panel.text.value
    assert panel.picture.widget.value == b""
    assert panel.python().startswith("# no templates")
    assert panel.errors.text == ""
    panel.close()
