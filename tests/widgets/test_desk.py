"""The desk without a kernel: set a control, look at the study and the error line."""

from __future__ import annotations

import threading

import pytest

from tests.widgets.conftest import PLAN
from toprecon.study import LiveStudy, StudyPlan, read_hand_off
from toprecon.widgets import AnglePanel, Desk

PNG = b"\x89PNG"


def picture(desk):
    return desk.panel.picture.widget.value


def show(desk, title):
    desk.view.value = title
    return desk.panel


def test_desk_shows_pictures_and_says_the_numbers(desk):
    assert picture(desk)[:4] == PNG
    assert desk.cuts.rows["pairing.chi2"].picture.widget.value[:4] == PNG
    assert desk.cuts.legend.value[:4] == PNG
    assert "A_FB generated" in desk.shared.status.value
    assert 'role="status"' in desk.shared.status.value
    assert desk.errors.text == ""


def test_slider_changes_plan_pictures_and_numbers(desk):
    row = desk.cuts.rows["pairing.chi2"]
    before = picture(desk), desk.shared.status.value, row.picture.widget.value
    row.slider.value = (0, 5)
    assert desk.plan.cuts[0].high == 5
    assert row.high.value == 5
    after = picture(desk), desk.shared.status.value, row.picture.widget.value
    assert all(old != new for old, new in zip(before, after, strict=True))


def test_what_a_front_end_sends_is_understood(desk):
    row = desk.cuts.rows["pairing.chi2"]
    row.slider.set_state({"value": [0, 7.5]})
    assert desk.plan.cuts[0].high == 7.5


def test_box_next_to_the_slider_does_the_same(desk):
    row = desk.cuts.rows["pairing.chi2"]
    row.high.value = 7.3
    assert desk.plan.cuts[0].high == 7.3
    assert row.slider.value[1] == pytest.approx(7.3, abs=0.3)


def test_limits_that_cross_are_one_sentence_until_the_next_good_plan(desk):
    row = desk.cuts.rows["pairing.chi2"]
    row.low.value = 41
    assert "low must not be above high" in desk.errors.text
    assert 'role="alert"' in desk.errors.widget.value
    row.high.value = 49
    assert desk.plan.cuts[0].low == 41
    assert desk.errors.text == ""


def test_cut_can_be_switched_off_added_and_removed(desk):
    row = desk.cuts.rows["pairing.chi2"]
    row.on.value = False
    assert not desk.plan.active_cuts
    desk.cuts.add.value = "pairing.w_mass"
    desk.cuts.rows["pairing.w_mass"].slider.value = (60, 100)
    assert desk.plan.cuts[1].low == 60
    assert desk.cuts.rows["pairing.w_mass"].picture.widget.value[:4] == PNG
    row.remove.click()
    assert [c.observable for c in desk.plan.cuts] == ["pairing.w_mass"]
    assert list(desk.cuts.rows) == ["pairing.w_mass"]


def test_plan_set_from_python_shows_in_the_controls(desk):
    desk.live.set_plan(
        StudyPlan().with_cut("pairing.gap", 2).with_cut("pairing.share", 0.5)
    )
    assert list(desk.cuts.rows) == ["pairing.gap", "pairing.share"]
    assert desk.cuts.rows["pairing.gap"].low.value == 2
    desk.live.set_cut("pairing.gap", 3.5)
    assert desk.cuts.rows["pairing.gap"].low.value == 3.5
    assert desk.cuts.rows["pairing.gap"].slider.value[0] == 3.5
    assert desk.plan.cuts[0].low == 3.5


@pytest.mark.parametrize("title", ["Angle", "Pairing", "Migration", "Events"])
def test_every_panel_draws_every_view_and_leaves_no_figure_behind(desk, title):
    import matplotlib.pyplot as plt

    panel = show(desk, title)
    assert panel.picture.widget.value[:4] == PNG
    seen = {panel.picture.widget.value}
    views = getattr(panel, "view", None)
    for view in views.options if views is not None else ():
        views.value = view
        seen.add(panel.picture.widget.value)
    assert len(seen) == (len(views.options) if views is not None else 1)
    assert desk.errors.text == ""
    assert plt.get_fignums() == []


def test_only_the_panel_on_view_is_drawn(desk):
    angle = picture(desk)
    show(desk, "Migration")
    desk.cuts.rows["pairing.chi2"].slider.value = (0, 5)
    assert desk.panels["Angle"].picture.widget.value == angle
    show(desk, "Angle")
    assert picture(desk) != angle


def test_no_selected_event_is_one_sentence_and_recovers(desk):
    desk.cuts.rows["pairing.chi2"].slider.value = (0, 0)
    assert "at least one selected event is required" in desk.errors.text
    assert "no result for these settings" in desk.shared.status.value
    desk.cuts.rows["pairing.chi2"].slider.value = (0, 20)
    assert desk.errors.text == ""
    assert "A_FB generated" in desk.shared.status.value


def test_beams_are_those_of_the_samples(desk):
    assert [value for _, value in desk.shared.beams.options] == ["plan", "LR"]
    before = picture(desk)
    desk.shared.beams.value = "LR"
    assert picture(desk) != before  # the small print says so
    assert 'result.by_helicity["LR"]' in desk.panel.python()


def test_plan_and_hand_off_are_written(desk):
    panel = show(desk, "Hand-off")
    panel.save.click()
    assert StudyPlan.load("study_plan.toml") == desk.plan
    panel.write.click()
    assert "hand-off written to hand_off" in panel.done.value
    assert read_hand_off("hand_off").migration.equals(desk.result.migration)
    panel.write.click()
    assert "a hand-off is there already" in desk.errors.text


@pytest.mark.parametrize(
    "title",
    ["Angle", "Pairing", "Scan", "Migration", "One event", "Events", "Compare"],
)
def test_code_shown_runs_and_gives_the_same_plan(desk, title, events):
    desk.cuts.rows["pairing.chi2"].slider.value = (0, 9)
    panel = show(desk, title)
    views = getattr(panel, "view", None)
    for view in views.options if views is not None else (None,):
        if views is not None:
            views.value = view
        scope = {"source": events}
        exec(f"{desk.live.code()}\n{panel.python()}", scope)
        assert scope["plan"] == desk.plan
        assert str(scope["result"]) == str(desk.result)


def test_desk_refuses_unknown_keywords(events):
    with pytest.raises(TypeError, match="synchronus"):
        Desk(events, synchronus=True)


def test_closing_frees_every_widget_and_the_thread(events, alive):
    for _ in range(3):
        desk = Desk(events, PLAN)
        for title in desk.panels:
            show(desk, title)
        desk.live.wait()
        desk.close()
    assert alive() == 0
    assert not any(t.name == "toprecon-live" for t in threading.enumerate())


def test_worker_shows_the_newest_state(events):
    desk = Desk(events, PLAN)
    try:
        row = desk.cuts.rows["pairing.chi2"]
        for high in (30, 20, 12, 9, 6):
            row.slider.value = (0, high)
        assert desk.result.plan.cuts[0].high == 6
        assert f"{desk.result.asymmetry.reconstructed.value:.3f}"[:4] in (
            desk.shared.status.value
        )
    finally:
        desk.close()


def test_desk_on_a_live_study_leaves_it_running(events):
    live = LiveStudy(events, PLAN, synchronous=True)
    first, second = Desk(live), AnglePanel(live)
    first.cuts.rows["pairing.chi2"].slider.value = (0, 5)
    assert "5" in second.live.plan.cuts[0].label
    first.close()
    before = second.picture.widget.value
    live.set_cut("pairing.chi2", high=30)
    assert second.picture.widget.value != before
    second.close()
    live.close()


def test_table_alone_cannot_be_paired_again(desk):
    other = Desk(desk.table, PLAN, synchronous=True)
    pairing = show(other, "Pairing")
    assert pairing.terms.rows["w_mass"]["on"].disabled
    assert pairing.settings.by_name["cap"].disabled
    assert show(other, "Events").settings.by_name["btag_high"].disabled
    other.close()
