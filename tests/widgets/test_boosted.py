"""The boosted panel: masses, branches and the tag."""

from __future__ import annotations

import pytest

from tests.samples import SAMPLES
from toprecon.study import StudyPlan
from toprecon.widgets import Desk
from toprecon.widgets.boosted import BoostedPanel

PNG = b"\x89PNG"
SIGNAL = [str(SAMPLES / f"lepjets_1500_{h}.root") for h in ("LR", "RL")]


@pytest.fixture
def panel():
    files = [*SIGNAL, str(SAMPLES / "qq_1500.root")]
    panel = BoostedPanel(files, StudyPlan(), synchronous=True)
    yield panel
    assert panel.errors.text == ""
    panel.close()


def test_one_button_takes_tagged_fat_jets_into_the_plan(panel):
    assert "Choose a branch with fat jets" in panel.text.value
    assert panel.picture.widget.layout.display == "none"
    panel.take.click()
    assert panel.live.plan.study.branch.value == "boosted"
    (cut,) = panel.live.plan.active_cuts
    assert cut.observable == "boosted.n_tagged"
    assert panel.branch.value.value == "boosted"
    assert "those on fat jets excepted" in panel.text.value
    assert panel.picture.widget.layout.display is None
    masses = panel.picture.widget.value
    panel.view.value = "observable"
    assert panel.picture.widget.value != masses
    assert "inside their fat jets" in panel.shared.status.value


def test_masses_are_those_before_the_cuts_on_fat_jets(panel):
    panel.take.click()
    masses = panel.picture.widget.value
    panel.live.set_plan(panel.live.plan.with_cut("boosted.tau_32", high=0.5))
    assert panel.picture.widget.value == masses
    panel.live.set_settings({"selection.btag_high": 0.9})
    assert panel.picture.widget.value != masses


@pytest.mark.parametrize("view", ["masses", "observable", "branches", "tag"])
def test_what_is_shown_as_python_runs(panel, view):
    panel.take.click()
    panel.view.value = view
    files = [*SIGNAL, str(SAMPLES / "qq_1500.root")]
    exec(panel.python(), {"source": files, "plan": panel.live.plan})


def test_the_desk_shows_fat_jets_and_both_comparisons():
    desk = Desk([*SIGNAL, str(SAMPLES / "qq_1500.root")], synchronous=True)
    desk.view.value = "Boosted"
    panel = desk.panel
    panel.take.click()
    assert panel.picture.widget.value[:4] == PNG
    pictures = {panel.picture.widget.value}
    for view in ("branches", "tag"):
        panel.view.value = view
        panel.start.click()
        pictures.add(panel.picture.widget.value)
    assert len(pictures) == 3
    assert desk.errors.text == ""
    assert desk.plan.study.branch.value == "boosted"
    assert "inside their fat jets" in desk.shared.status.value
    # what was found stays while other panels are on view
    desk.view.value = "Angle"
    desk.view.value = "Boosted"
    assert desk.panel.picture.widget.value in pictures
    desk.close()


@pytest.mark.parametrize(
    ("view", "button", "words", "code"),
    [
        (
            "branches",
            "compare the branches",
            "Both branches",
            "compare_branches(source",
        ),
        ("tag", "measure the tag", "of the others", "tag_quality(source"),
    ],
)
def test_long_work_is_started_by_its_button(panel, view, button, words, code):
    panel.view.value = view
    assert panel.start.description == button
    assert panel.picture.widget.layout.display == "none"
    panel.start.click()
    assert not panel.start.disabled
    assert words in panel.text.value
    assert panel.picture.widget.layout.display is None
    assert panel.picture.widget.value[:4] == PNG
    assert code in panel.python()


def test_tag_without_a_background_is_one_sentence():
    panel = BoostedPanel(SIGNAL, StudyPlan(), synchronous=True)
    panel.view.value = "tag"
    panel.start.click()
    assert "none of another process" in panel.errors.text
    assert not panel.start.disabled
    panel.close()
