"""Calibration from the pairing panel."""

from __future__ import annotations

from tests.samples import SAMPLES
from toprecon.study import StudyPlan
from toprecon.widgets.desk import Desk
from toprecon.widgets.pairing import PairingPanel

FILES = [str(SAMPLES / f"lepjets_550_{h}.root") for h in ("LR", "RL")]


def test_button_calibrates_and_the_plan_follows():
    panel = PairingPanel(FILES, StudyPlan(), synchronous=True)
    before = panel.live.result.asymmetry.fraction_right
    controls = panel.calibration
    controls.button.click()
    assert panel.errors.text == ""
    assert panel.live.plan.pairing.score.value == "ratio"
    assert "lepjets_550_RL" in controls.quality.value
    assert panel.live.result.asymmetry.fraction_right.value > before.value
    assert not controls.button.disabled
    assert ".with_calibrations('calibration_550_" in panel._code.value.replace(
        "&#x27;", "'"
    )
    panel.close()


def test_slider_of_the_score_takes_the_range_of_the_ratio():
    plan = StudyPlan().with_cut("pairing.chi2", high=15)
    desk = Desk(FILES, plan, synchronous=True)
    desk.view.value = "Pairing"
    assert desk.cuts.rows["pairing.chi2"].slider.min == 0
    desk.panels["Pairing"].calibration.button.click()
    row = desk.cuts.rows["pairing.chi2"]
    assert (row.slider.min, row.slider.max) == (-40, 20)
    assert row.limits == (None, 15)
    assert "right/wrong" in row.on.description
    desk.close()


def test_too_few_events_are_one_sentence(tmp_path):
    plan = StudyPlan().with_settings({"selection.btag_high": 0.999999})
    panel = PairingPanel(FILES, plan, synchronous=True)
    panel.calibration.button.click()
    assert "calibration" in panel.errors.text
    assert panel.live.plan.pairing.score.value == "plain"
    panel.close()
