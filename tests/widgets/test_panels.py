"""Panels by themselves, their settings, errors and progress."""

from __future__ import annotations

import pytest

from tests.widgets.conftest import PLAN
from toprecon import widgets
from toprecon.study import Binning
from toprecon.widgets.base import Panel

PANELS = [getattr(widgets, name) for name in widgets.__all__ if name.endswith("Panel")]


@pytest.mark.parametrize("kind", PANELS)
def test_every_panel_works_alone_and_frees_its_widgets(events, alive, kind):
    panel = kind(events, PLAN, synchronous=True)
    assert "A_FB generated" in panel.shared.status.value
    assert panel.errors.text == ""
    panel.live.set_cut("pairing.chi2", high=9)
    assert panel.errors.text == ""
    assert panel.title
    panel.close()
    assert alive() == 0


@pytest.mark.parametrize("kind", PANELS)
def test_every_panel_refuses_unknown_keywords(events, kind):
    with pytest.raises(TypeError, match="synchronus"):
        kind(events, synchronus=True)


def test_unforeseen_error_is_shown_with_its_type_and_raised_in_strict_mode(events):
    class Broken(Panel):
        def build(self):
            return []

        def paint(self):
            raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        Broken(events, PLAN, synchronous=True)


def test_unforeseen_error_is_only_shown_otherwise(events, monkeypatch):
    monkeypatch.setenv("TOPRECON_STRICT", "0")

    class Broken(Panel):
        def build(self):
            return []

        def paint(self):
            msg = "oops <b>"
            raise ZeroDivisionError(msg)

    panel = Broken(events, PLAN, synchronous=True)
    assert panel.errors.text == "ZeroDivisionError: oops <b>"
    assert "&lt;b&gt;" in panel.errors.widget.value
    panel.close()


def test_selection_control_changes_the_table(desk):
    desk.view.value = "Events"
    table = desk.table
    controls = desk.panel.settings.by_name
    controls["btag_high"].value = 0.9
    assert desk.plan.selection.btag_high == 0.9
    assert (desk.table["stage"] == 0).sum() < (table["stage"] == 0).sum()


def test_setting_that_may_be_absent_is_a_box_that_may_be_empty(desk):
    desk.view.value = "Events"
    box = desk.panel.settings.by_name["max_jets"]
    box.value = "5"
    assert desk.plan.selection.max_jets == 5
    box.value = "five"
    assert (
        desk.errors.text
        == "selection.max_jets: must be a whole number or empty; got 'five'"
    )
    assert desk.plan.selection.max_jets == 5
    box.value = ""
    assert desk.plan.selection.max_jets is None
    assert desk.errors.text == ""


def test_limits_of_controls_are_those_of_the_declaration(desk):
    control = desk.panels["Events"].settings.by_name["btag_high"]
    assert (control.min, control.max, control.step) == (0, 1, 0.01)
    assert control.tooltip.startswith("the highest b score must be above this")
    energy = desk.panels["Events"].settings.by_name["min_lepton_energy"]
    assert energy.description == "min lepton energy [GeV]"


def test_pairing_term_can_be_switched_and_edited(desk):
    desk.view.value = "Pairing"
    row = desk.panel.terms.rows["top_energy"]

    def term():
        return next(t for t in desk.plan.pairing.terms if t.name == "top_energy")

    row["on"].value = True
    row["below"].value = "12"
    assert term().on
    assert term().below == 12
    row["below"].value = "twelve"
    assert "must be a number or empty; got 'twelve'" in desk.errors.text
    assert term().below == 12


def test_settings_changed_from_python_show_in_the_controls(desk):
    desk.live.set_settings(
        {
            "selection.btag_high": 0.7,
            "selection.max_jets": 6,
            "pairing.cap": 5,
            "migration.edges": [-1, 0, 1],
            "beams.luminosity": 500.0,
        }
    )
    desk.live.configure(
        pairing=desk.plan.pairing.with_term("top_energy", on=True, target=251.5)
    )
    for title in desk.panels:
        desk.view.value = title
    selection = desk.panels["Events"].settings.by_name
    assert selection["btag_high"].value == 0.7
    assert selection["max_jets"].value == "6"
    pairing = desk.panels["Pairing"]
    assert pairing.settings.by_name["cap"].value == 5
    assert pairing.terms.rows["top_energy"]["on"].value
    assert pairing.terms.rows["top_energy"]["target"].value == "251.5"
    assert desk.panels["Migration"].bins.value == 2
    assert desk.panels["Hand-off"].settings.by_name["luminosity"].value == 500
    assert desk.plan.migration.edges == (-1, 0, 1)


def test_distribution_and_purity_follow_the_observable_chosen(desk):
    desk.view.value = "Pairing"
    desk.panel.view.value = "purity against a cut"
    before = desk.panel.picture.widget.value
    desk.panel.observable.value = "pairing.gap"
    assert desk.panel.picture.widget.value != before
    assert "pairing.gap" in desk.panel.python()


def test_bins_of_the_matrix_can_be_chosen(desk):
    desk.view.value = "Migration"
    desk.panel.bins.value = 4
    assert desk.result.migration.true_binning == Binning.regular(4, -1, 1)
    assert "in the matrix" in desk.panel.numbers.value


def test_closure_test_says_how_well_it_closes(desk):
    desk.view.value = "Migration"
    desk.panel.view.value = "closure test"
    seen = set()
    for method in desk.panel.method.options:
        desk.panel.method.value = method
        seen.add(desk.panel.picture.widget.value)
        assert "probability of a larger χ²" in desk.panel.numbers.value
        assert desk.errors.text == ""
    assert len(seen) == 3


def test_both_estimators_are_said(desk):
    found = desk.result.asymmetry.estimators(desk.plan.asymmetry)
    words = desk.panel.meaning.value
    for estimator in (found.counting, found.fit):
        assert str(estimator.extrapolated).replace("+-", "±") in words
    assert "expected data" not in words
    desk.cuts.rows["pairing.chi2"].high.value = 0.05  # hardly any event is left
    assert desk.errors.text == ""


def test_meaning_of_the_shift_is_said_in_couplings(desk):
    desk.panel.view.value = "causes of the shift"
    assert "It would be mistaken for a change" in desk.panel.meaning.value
    assert "standard deviations" not in desk.panel.meaning.value  # no luminosity
    desk.live.set_settings({"beams.luminosity": 500.0})
    assert desk.errors.text == ""


def test_samples_and_cross_sections_are_listed(desk):
    desk.view.value = "Events"
    name = desk.result.samples[0].name
    assert name in desk.panel.samples.value
    assert "<th>√s [GeV]</th>" in desk.panel.samples.value


def test_angle_shows_further_variants_on_demand(desk):
    before = desk.panel.picture.widget.value
    desk.panel.chosen.value = True
    one = desk.panel.picture.widget.value
    desk.panel.closest.value = True
    assert len({before, one, desk.panel.picture.widget.value}) == 3


def test_progress_is_shown_while_events_are_reconstructed(events, monkeypatch):
    from toprecon.study import live_source

    monkeypatch.setattr(live_source, "CHUNK", 500)
    panel = widgets.AnglePanel(events, PLAN)
    seen = []
    panel.shared.progress.layout.observe(
        lambda event: seen.append(event["new"]), names="display"
    )
    said = []
    panel.shared.status.observe(lambda event: said.append(event["new"]), names="value")
    try:
        panel.live.wait()
        panel.live.set_settings({"selection.btag_high": 0.8})
        panel.live.wait()
        assert seen[-2:] == [None, "none"]
        assert any("reconstructing: 500 of 3,000 events" in text for text in said)
    finally:
        panel.close()


def test_best_point_of_a_scan_goes_into_the_plan(desk):
    desk.view.value = "Scan"
    panel = desk.panel
    assert panel.picture.widget.value[:4] == b"\x89PNG"
    assert "chosen on half A" in panel.best.value
    panel.take.click()
    (observable, low, high) = panel._point.cuts[0]
    assert (low, high) == (None, desk.plan.cuts[0].high)
    assert desk.cuts.rows[observable].high.value == pytest.approx(high)


def test_second_cut_makes_the_scan_a_plane(desk):
    desk.view.value = "Scan"
    desk.panel.second.value = "pairing.share"
    desk.panel.keep_second.value = "above"
    assert len(desk.panel._point.cuts) == 2
    assert 'keep="above"' in desk.panel.python()
    desk.panel.first.value = "pairing.share"
    assert "one or two different observables are required" in desk.errors.text
    desk.panel.second.value = ""
    desk.cuts.rows["pairing.chi2"].high.value = 39
    assert desk.errors.text == ""
    assert desk.panel.keep_first.value == "above"


def test_scan_without_a_good_point_is_one_sentence(desk):
    desk.view.value = "Scan"
    desk.panel.smallest.value = 0.99
    assert "a point with enough events is required" in desk.errors.text
    before = desk.plan
    desk.panel.take.click()
    assert desk.plan == before


def test_kept_plan_is_compared_with_the_present_one(desk):
    desk.view.value = "Compare"
    panel = desk.panel
    assert "Keep the present plan" in panel.text.value
    panel.keep.click()
    kept = desk.plan
    desk.cuts.rows["pairing.chi2"].slider.value = (0, 8)
    assert panel.picture.widget.value[:4] == b"\x89PNG"
    assert "events selected by both" in panel.text.value
    panel.back.click()
    assert desk.plan == kept
    assert desk.cuts.rows["pairing.chi2"].high.value == 40


def test_other_jets_can_be_compared_too(desk):
    desk.view.value = "Compare"
    desk.panel.keep.click()
    desk.live.set_settings({"pairing.tags": "ignore"})
    assert "events selected by both" in desk.panel.text.value
    assert desk.errors.text == ""


@pytest.mark.parametrize("kind", ["", "CORRECT", "B_SWAPPED", "FLIPPED"])
def test_events_of_a_kind_are_shown_one_by_one(desk, kind):
    desk.view.value = "One event"
    panel = desk.panel
    panel.kind.value = kind
    assert panel.number.max == len(panel._rows) > 1
    table = desk.table
    assert desk.live.selected()[panel._rows].all()
    if kind == "FLIPPED":
        product = table["cos_theta_true"] * table["cos_theta_reco"]
        assert (product[panel._rows] < 0).all()
    before = panel.picture.widget.value
    panel.number.value = 2
    assert panel.picture.widget.value != before
    assert desk.errors.text == ""


def test_no_event_of_a_kind_is_said(desk):
    desk.view.value = "One event"
    desk.panel.kind.value = "UNMATCHED"  # partons are always matched
    assert "no such event is selected" in desk.panel.of.value
    assert desk.panel.row == -1


def test_one_event_without_events_is_one_sentence(desk):
    panel = widgets.EventPanel(desk.table, PLAN, synchronous=True)
    assert "the study was given a saved table" in panel.errors.text
    panel.close()


def test_boosted_branch_without_particles_is_one_sentence_and_recovers(desk):
    desk.view.value = "Boosted"
    panel = desk.panel
    assert "Choose a branch with fat jets" in panel.text.value
    panel.branch.value = next(v for _, v in panel.branch.options if v == "boosted")
    assert "particles" in desk.errors.text
    panel.branch.value = next(v for _, v in panel.branch.options if v == "resolved")
    assert desk.errors.text == ""


def test_fat_jets_are_shown_for_events_with_particles(sample_folder):
    plan = PLAN.with_settings({"study.branch": "boosted"}).replace(cuts=())
    path = sample_folder / "lepjets_1500_LR.root"
    panel = widgets.BoostedPanel(path, plan, synchronous=True)
    assert panel.errors.text == ""
    assert panel.picture.widget.value[:4] == b"\x89PNG"
    assert "boosted." in panel.python()
    panel.close()


def test_only_observables_of_the_table_are_offered(desk):
    offered = [name for _, name in desk.cuts.add.options]
    assert "pairing.chi2" in offered
    assert not any(name.startswith(("boosted.", "fit.")) for name in offered)
    desk.live.set_settings({"fit.on": True})
    assert any(name.startswith("fit.") for _, name in desk.cuts.add.options)


def test_cell_that_runs_again_closes_what_it_showed_before(events, monkeypatch, capsys):
    from toprecon.widgets import base

    monkeypatch.setattr(base, "_SHOWN", {})
    closed = []

    class Shown:
        widget = "a widget"

        def __init__(self, name):
            self.name = name

        def close(self):
            closed.append(self.name)

    here = ["cell 1", "run 1"]
    monkeypatch.setattr(base, "_present_cell", lambda: tuple(here))
    first, second, third = Shown("first"), Shown("second"), Shown("third")
    base.show_in_cell(first)
    base.show_in_cell(second)  # two in one cell stay both
    assert closed == []
    here[:] = ["cell 2", "run 2"]
    base.show_in_cell(third)
    assert closed == []
    here[:] = ["cell 1", "run 3"]
    base.show_in_cell(second)  # shown again: stays
    assert closed == ["first"]
    here[:] = ["", ""]  # not in a notebook
    base.show_in_cell(third)
    assert closed == ["first"]
    assert "a widget" in capsys.readouterr().out
