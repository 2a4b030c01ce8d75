"""Calibration of a plan in one call, and the files it is kept in."""

from __future__ import annotations

import numpy as np
import pytest

from tests.samples import SAMPLES
from toprecon.errors import InputError, OptionError, StudyError
from toprecon.resampling import in_half_a
from toprecon.study import StudyPlan, calibrate_plan, open_events, reconstruct

FILES = [str(SAMPLES / f"lepjets_550_{h}.root") for h in ("LR", "RL")]


@pytest.fixture(scope="module")
def found():
    return calibrate_plan(FILES, StudyPlan())


def test_both_samples_are_paired_better_on_the_other_half(found):
    assert [q.sample for q in found.quality] == ["lepjets_550_LR", "lepjets_550_RL"]
    for row in found.quality:
        gain = row.after.value - row.before.value
        # paired in truth; the errors of both added linearly are on the safe side
        assert gain > 2 * (row.after.error + row.before.error)
        assert row.after.value > 0.93
    text = str(found)
    assert "half B" in text
    assert "lepjets_550_LR" in text


def test_events_and_files_give_the_same_plan(found):
    seen = []
    events = open_events(FILES).read()
    assert calibrate_plan(events, StudyPlan()).plan == found.plan
    source = open_events(FILES)
    again = calibrate_plan(source, StudyPlan(), progress=lambda *s: seen.append(s))
    assert again.plan == found.plan
    assert seen == [(1, 2), (2, 2)]


def test_fewer_events_are_taken_from_every_sample():
    few = calibrate_plan(FILES, StudyPlan(), most=1200)
    assert sum(q.events for q in few.quality) < 1300
    assert few.plan.pairing.calibrations[0].n_right < 1300


def test_half_b_does_not_enter(found):
    events = open_events(FILES).read()
    only_a = events[in_half_a(np.asarray(events.id))]
    assert calibrate_plan(only_a, StudyPlan()).plan == found.plan


@pytest.mark.parametrize("score", ["plain", "correlated"])
def test_other_scores_and_tags(score):
    plan = calibrate_plan(FILES, StudyPlan(), score=score, tags="mask").plan
    assert plan.pairing.score.value == score
    assert plan.pairing.tags.value == "mask"
    term = next(t for t in plan.pairing.terms if t.name == "w_mass")
    assert (term.target is not None) == (score == "plain")


def test_plan_keeps_calibrations_in_files_named_by_their_hash(found, tmp_path):
    path = found.plan.save(tmp_path / "deep" / "plan.toml")
    names = sorted(p.name for p in path.parent.iterdir())
    assert len(names) == 2
    assert names[0].startswith("calibration_550_")
    assert names[0] in path.read_text()
    assert len(path.read_text()) < 5000
    assert StudyPlan.load(path) == found.plan
    assert StudyPlan.load(path).hash == found.plan.hash


def test_code_of_a_calibrated_plan_names_the_file(found, tmp_path, monkeypatch):
    found.plan.save(tmp_path / "plan.toml")
    monkeypatch.chdir(tmp_path)
    for plan in (
        found.plan,
        found.plan.with_cut("pairing.chi2", high=-2),
        found.plan.with_settings({"pairing.score": "plain"}),
    ):
        code = plan.as_code()
        assert len(code) < 400
        assert eval(code, {"StudyPlan": StudyPlan}) == plan


def test_changed_calibration_is_refused(found, tmp_path):
    path = found.plan.save(tmp_path / "plan.toml")
    (table,) = tmp_path.glob("calibration_*.toml")
    table.write_text(table.read_text().replace("n_right = ", "n_right = 1"))
    with pytest.raises(OptionError, match="must have the content that its name says"):
        StudyPlan.load(path)


def test_missing_and_damaged_calibrations_are_named(found, tmp_path):
    path = found.plan.save(tmp_path / "plan.toml")
    (table,) = tmp_path.glob("calibration_*.toml")
    table.write_text("sqrt_s = ")
    with pytest.raises(OptionError, match="must be a calibration in TOML"):
        StudyPlan.load(path)
    table.unlink()
    with pytest.raises(InputError, match="keep it in the folder of the plan"):
        StudyPlan.load(path)


def test_score_of_the_ratio_has_a_range_of_its_own(found):
    ranges = {
        name: {o.name: o.range for o in plan.observables}["pairing.chi2"]
        for name, plan in (("plain", StudyPlan()), ("ratio", found.plan))
    }
    assert ranges == {"plain": (0, 50), "ratio": (-40, 20)}
    table = reconstruct(open_events(FILES).read(), found.plan)
    score = table["pairing.chi2"][table["stage"] == 0]
    inside = (score >= -40) & (score < 20)
    assert inside.mean() > 0.95


def test_wrong_words_are_answered_with_the_right_ones():
    with pytest.raises(OptionError, match="score must be one of plain, correlated"):
        calibrate_plan(FILES, StudyPlan(), score="best")
    with pytest.raises(OptionError, match="tags must be one of mask"):
        calibrate_plan(FILES, StudyPlan(), tags="both")


def test_too_few_events_are_said_to_be_too_few():
    with pytest.raises(StudyError, match="at least 200 selected, matched events"):
        calibrate_plan(FILES, StudyPlan(), most=200)


def test_backgrounds_cannot_calibrate():
    with pytest.raises(StudyError, match="selected top pairs with truth are required"):
        calibrate_plan([str(SAMPLES / "ww_550.root")], StudyPlan())
