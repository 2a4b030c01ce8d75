"""The compare panel: a kept plan, and variations of the input."""

from __future__ import annotations

from pathlib import Path

from toprecon.study import StudyPlan
from toprecon.widgets import ComparePanel

FILE = str(Path(__file__).parents[2] / "sample_events" / "lepjets_550_LR.root")


def test_variations_are_made_by_a_button_and_say_when_they_are_old():
    panel = ComparePanel(FILE, StudyPlan(), synchronous=True)
    panel.view.value = "with variations"
    assert "how much would the results shift" in panel.text.value
    assert panel.buttons.layout.display == "none"
    panel.vary.click()
    assert panel.errors.text == ""
    assert not panel.vary.disabled
    assert "<td>jet energy +1 %</td>" in panel.text.value
    assert "±" in panel.text.value
    assert "earlier plan" not in panel.text.value
    assert "variation_shifts(source, plan" in panel.python()
    panel.live.set_cut("pairing.chi2", high=10)
    assert "earlier plan" in panel.text.value
    panel.view.value = "with a kept plan"
    assert panel.vary.layout.display == "none"
    panel.close()
