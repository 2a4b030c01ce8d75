"""The compare panel: a kept plan, and variations of the input."""

from __future__ import annotations

from tests.samples import SAMPLES
from toprecon.study import StudyPlan, reconstruct_source
from toprecon.widgets import ComparePanel

FILE = str(SAMPLES / "lepjets_550_LR.root")


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


def test_variations_can_be_stopped():
    panel = ComparePanel(FILE, StudyPlan())
    panel.live.wait()
    panel.view.value = "with variations"
    steps = []

    def stop_in_the_middle(live):
        if live.progress.doing == "varying":
            steps.append((live.progress.done, live.progress.total))
            if live.progress.done == 3:
                live.stop()

    panel.live.on_change(stop_in_the_middle)
    panel.vary.click()
    panel.live.wait()
    assert steps[-1] == (3, 8)
    assert "varying: stopped before the end" in panel.errors.text
    assert not panel.vary.disabled
    assert "how much would the results shift" in panel.text.value
    panel.close()


def test_python_of_the_panel_gives_what_is_shown():
    panel = ComparePanel(FILE, StudyPlan(), synchronous=True)
    panel.keep.click()
    panel.live.set_cut("pairing.chi2", high=10)
    names = {"source": FILE, "plan": panel.live.plan, "StudyPlan": StudyPlan}
    *lines, last = panel.python().splitlines()
    exec("\n".join(lines), names)
    found = eval(last, names)
    assert f"{found.selected_both:,} events selected by both" in panel.text.value
    assert "of those of both none changes the hemisphere" in panel.text.value
    panel.live.set_plan(panel.live.plan.with_settings({"pairing.top_mass": 180.0}))
    assert "change the hemisphere" in panel.text.value
    assert "none" not in panel.text.value
    panel.close()


def test_a_study_of_a_table_has_nothing_to_vary():
    table = reconstruct_source(FILE, StudyPlan())
    panel = ComparePanel(table, StudyPlan(), synchronous=True)
    panel.view.value = "with variations"
    assert panel.vary.disabled
    assert "needs the events" in panel.text.value
    panel.close()
