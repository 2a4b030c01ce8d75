"""The desk without a kernel: set a control, look at the study and the error line."""

from __future__ import annotations

import ipywidgets
import pytest

import toprecon
from toprecon.study import StudyPlan, read_hand_off
from toprecon.widgets import Desk

PNG = b"\x89PNG"


@pytest.fixture(scope="module")
def events():
    return toprecon.generate(3000, seed=7)


@pytest.fixture
def desk(events, monkeypatch, tmp_path):
    monkeypatch.setenv("TOPRECON_STRICT", "1")
    monkeypatch.chdir(tmp_path)
    plan = StudyPlan().with_cut("pairing.chi2", high=40)
    desk = Desk(events, plan, synchronous=True)
    yield desk
    desk.close()


def test_desk_shows_a_picture_and_says_the_numbers(desk):
    assert desk.picture.widget.value[:4] == PNG
    assert "A_FB generated" in desk.status.value
    assert 'role="status"' in desk.status.value
    assert desk.errors.widget.value == ""


def _term(desk):
    return next(t for t in desk.plan.pairing.terms if t.name.value == "top_energy")


def test_slider_changes_plan_picture_and_numbers(desk):
    before = desk.picture.widget.value, desk.status.value
    desk.cuts.rows["pairing.chi2"].slider.value = (0, 5)
    assert desk.plan.cuts[0].high == 5
    assert desk.cuts.rows["pairing.chi2"].high.value == 5
    assert desk.picture.widget.value != before[0]
    assert desk.status.value != before[1]


def test_box_next_to_the_slider_does_the_same(desk):
    desk.cuts.rows["pairing.chi2"].high.value = 7.3
    assert desk.plan.cuts[0].high == 7.3
    assert desk.cuts.rows["pairing.chi2"].slider.value[1] == pytest.approx(7.3, abs=0.3)


def test_value_beyond_the_slider_is_kept_by_the_box(desk):
    desk.cuts.rows["pairing.chi2"].low.value = 41
    assert "low must not be above high" in desk.errors.widget.value
    desk.cuts.rows["pairing.chi2"].high.value = 49
    assert desk.plan.cuts[0].low == 41


def test_cut_can_be_switched_off_added_and_removed(desk):
    row = desk.cuts.rows["pairing.chi2"]
    row.on.value = False
    assert not desk.plan.active_cuts
    desk.cuts.add.value = "pairing.w_mass"
    desk.cuts.rows["pairing.w_mass"].slider.value = (60, 100)
    assert desk.plan.cuts[1].low == 60
    row.remove.click()
    assert [c.observable for c in desk.plan.cuts] == ["pairing.w_mass"]


@pytest.mark.parametrize(
    "view", ["Angle", "Causes", "Pairing", "Flips", "Migration", "Cuts", "Events"]
)
def test_every_view_draws_and_leaves_no_figure_behind(desk, view):
    import matplotlib.pyplot as plt

    desk.view.value = view
    assert desk.picture.widget.value[:4] == PNG
    assert desk.errors.widget.value == ""
    assert plt.get_fignums() == []


def test_selection_control_changes_the_table(desk):
    table = desk.table
    desk.settings["btag_high"].value = 0.9
    assert desk.plan.selection.btag_high == 0.9
    assert (desk.table["stage"] == 0).sum() < (table["stage"] == 0).sum()


def test_pairing_term_can_be_switched_and_edited(desk):
    desk.terms.rows["top_energy"]["on"].value = True
    desk.terms.rows["top_energy"]["below"].value = "12"
    assert _term(desk).on
    assert _term(desk).below == 12
    desk.terms.rows["top_energy"]["below"].value = "twelve"
    assert "must be a number or empty; got" in desk.errors.widget.value
    assert _term(desk).below == 12


def test_no_selected_event_is_one_sentence_and_recovers(desk):
    desk.cuts.rows["pairing.chi2"].slider.value = (0, 0)
    assert "at least one selected event is required" in desk.errors.widget.value
    desk.cuts.rows["pairing.chi2"].slider.value = (0, 20)
    assert desk.errors.widget.value == ""


def test_beams_are_those_of_the_samples(desk):
    assert [value for _, value in desk.beams.options] == ["plan", "LR"]


def test_plan_and_hand_off_are_written(desk):
    desk._save()
    assert StudyPlan.load("study_plan.toml") == desk.plan
    desk._hand_off()
    assert read_hand_off("hand_off").migration.equals(desk.result.migration)
    desk._hand_off()
    assert "a hand-off is there already" in desk.errors.widget.value


def test_code_shown_gives_the_same_plan(desk):
    code = desk.live.code()
    scope = {"source": None}
    lines = [line for line in code.splitlines() if not line.startswith("result")]
    exec("\n".join(lines), scope)
    assert scope["plan"] == desk.plan


def test_desk_refuses_unknown_keywords(events):
    with pytest.raises(TypeError, match="synchronus"):
        Desk(events, synchronus=True)


def test_closing_frees_every_widget(events):
    known = set(ipywidgets.widgets.widget._instances)
    Desk(events, synchronous=True).close()
    left = set(ipywidgets.widgets.widget._instances) - known
    assert len(left) == 0


def test_worker_shows_the_newest_state(events):
    desk = Desk(events, StudyPlan().with_cut("pairing.chi2", high=40))
    try:
        row = desk.cuts.rows["pairing.chi2"]
        for high in (30, 20, 12, 9, 6):
            row.slider.value = (0, high)
        result = desk.result
        assert result.plan.cuts[0].high == 6
        assert desk.live.shown_plan == desk.plan
    finally:
        desk.close()
