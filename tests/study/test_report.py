from __future__ import annotations

import json

import numpy as np
import pytest

from tests.samples import SAMPLES
from tests.study.numbers import leaves
from toprecon.study import (
    PairingClass,
    StudyPlan,
    angle_linearity,
    bias_meaning,
    budget_text,
    helicity_summary,
    open_events,
    reconstruct,
    result_mapping,
    result_text,
    run_study,
    sentence_of,
)


@pytest.fixture(scope="module")
def result(study_files, study_plan):
    return run_study(study_files, study_plan)


def test_the_mapping_is_plain_data_without_nan(result):
    data = result_mapping(result)
    assert json.loads(json.dumps(data, allow_nan=False)) == data
    plain = int | float | str | None
    assert all(isinstance(value, plain) for _, value in leaves(data))


def test_the_mapping_holds_the_numbers_of_the_result(result):
    data = result.to_mapping()
    afb = data["by_helicity"]["LR"]["afb"]
    a = result.by_helicity["LR"].asymmetry
    assert afb["reconstructed"]["value"] == a.reconstructed.value
    assert afb["reconstructed"]["error"] == a.reconstructed.error
    flow = data["beams"]["cut_flow"]
    assert [step["count"] for step in flow] == result.cut_flow.counts.tolist()
    matrix = data["beams"]["migration"]["counts"]
    assert np.array_equal(matrix, result.migration.counts)


def test_the_causes_add_up_to_the_shift(result):
    for beams in (result.beams, *result.by_helicity.values()):
        budget = result_mapping(result)["beams"]["budget"]
        assert set(budget) == {s.name for s in beams.asymmetry.budget.steps}
        total = sum(s.shift.value for s in beams.asymmetry.budget.steps)
        # differences of sums of a few hundred weights
        assert total == pytest.approx(beams.asymmetry.total_shift.value, abs=1e-12)


def test_the_text_shows_every_beam_and_its_numbers(result):
    text = result_text(result)
    assert text.splitlines()[0] == "study (lepton+jets, resolved)"
    assert "beams -0.8, +0.3; expected at 500 fb^-1" in text
    assert "beams LR (e-L e+R)" in text
    assert "beams RL (e-R e+L)" in text
    assert str(result.asymmetry.reconstructed_signal) in text
    assert text.splitlines()[-2].startswith("caution: simulated events; statistical")


def test_one_sample_of_pure_beams_is_shown_once(study_files, study_plan):
    plan = study_plan.with_settings({"beams.luminosity": "0"})
    text = result_text(run_study(study_files[0], plan))
    assert "all samples" not in text
    assert text.count("A_FB generated") == 1


def test_undefined_values_are_told(result):
    import dataclasses

    told = dataclasses.replace(result, undefined={"pairing.gap": 3, "pairing.chi2": 0})
    text = result_text(told)
    assert "3 events fail the cut on an undefined pairing.gap" in text
    assert "undefined pairing.chi2" not in text


def test_the_sentence_gives_counts_and_asymmetries(result):
    sentence = sentence_of(result.beams)
    a = result.asymmetry
    assert "expected events selected" in sentence
    assert str(a.generated_selected).replace("+-", "±") in sentence
    assert "+-" not in sentence


def test_the_result_in_one_line(result):
    assert str(result).startswith("study: A_FB generated ")
    assert "\n" not in str(result)


@pytest.mark.parametrize(
    ("branch", "words"),
    [
        ("resolved", "Correct pairing in {} of the matched events"),
        ("boosted", "inside their fat jets in {} of the selected signal events"),
        (
            "per event",
            "inside their fat jets, in {} of the signal events matched or with",
        ),
    ],
)
def test_what_is_right_is_said_for_every_branch(branch, words):
    sample = SAMPLES / "lepjets_1500_LR.root"
    loose = {
        "study.branch": branch,
        "selection.min_jets": 0,
        "selection.btag_high": 0.0,
        "selection.btag_low": 0.0,
    }
    result = run_study(str(sample), StudyPlan().with_settings(loose))
    fraction = result.asymmetry.fraction_right
    assert 0.2 < fraction.value < 0.98
    words = words.format(fraction).replace("+-", "±")
    assert words in sentence_of(result.beams)


@pytest.mark.parametrize("branch", ["boosted", "per event"])
def test_fat_jets_none_of_which_leaks_are_not_called_pairings(branch):
    sample = SAMPLES / "lepjets_1500_LR.root"
    plan = StudyPlan().with_settings({"study.branch": branch})
    plan = plan.with_cut("boosted.n_tagged", low=1)
    events = open_events(str(sample)).read()
    table = reconstruct(events, plan)
    whole = table["pairing_class"] != PairingClass.LEAKING
    result = run_study(table.take(np.flatnonzero(whole)), plan)
    assert result.asymmetry.fraction_right.value == 1
    for words in (sentence_of(result.beams), result_text(result)):
        assert "inside their fat jets" in " ".join(words.split())
        assert "orrect pairing in" not in words


def test_cross_sections_and_left_right_asymmetry_are_told(result):
    found = helicity_summary(result)
    data = result_mapping(result)["helicities"]
    assert data["A_LR"]["value"] == found.left_right.value
    assert data["names"] == ["sigma_L", "sigma_R", "A_L", "A_R"]
    total = np.add(data["data_covariance"], data["polarisation_covariance"])
    assert np.array_equal(total, found.covariance)
    text = result_text(result)
    assert f"A_LR    {found.left_right!s:>22}" in text
    assert f"sigma_L {found['sigma_L']!s:>22} fb" in text
    assert max(len(line) for line in text.splitlines()) <= 90


def test_beams_that_cannot_tell_the_helicities_apart_say_why(study_files, study_plan):
    same = {"beams.electron_polarisation": 0, "beams.positron_polarisation": 0}
    result = run_study(study_files, study_plan.with_settings(same))
    data = result_mapping(result)["helicities"]
    assert "runs" in data["missing"]
    assert "A_LR" not in result_text(result)


def test_parts_of_the_result_print_as_readable_text(result):
    a = result.by_helicity["LR"].asymmetry
    budget = str(a.budget).splitlines()
    assert budget[0].endswith(str(a.generated))
    assert str(a.budget["wrong_b"].shift) in str(a.budget)
    assert budget[-1] == f"{'difference':<24}{a.total_shift!s:>22}  paired error"
    assert f"slope 1-a-b {a.flips.slope}" in str(a.flips)
    assert f"counting {a.estimators().counting.extrapolated}" in str(a.estimators())
    meaning = bias_meaning(result, "LR")
    assert "standard deviations of the expected data" in str(meaning)
    assert f"f1v_z: {meaning.couplings['f1v_z'].shift}" in str(meaning)


def test_linearity_prints_a_row_per_truth(study_files, study_plan):
    events = open_events(study_files).read()
    found = angle_linearity(events, study_plan, factors=(0.5, 1.0))
    lines = str(found).splitlines()
    assert len(lines) == 4
    assert lines[1].endswith(str(found["asymmetry x 0.5"]))
    assert f"slope {found.slope}" in lines[-1]


def test_budgets_stand_side_by_side_and_add_up(result, study_files, study_plan):
    lines = budget_text(result).splitlines()
    assert lines[0].split("  ")[-1].strip() == "RL"
    assert "-0.8, +0.3" in lines[0]
    columns = [result.beams, *result.by_helicity.values()]
    for column, beams in enumerate(columns):
        cells = [line[24 + 22 * column :][:22].split(" +- ")[0] for line in lines[1:]]
        first, *steps, last, total = (float(cell) for cell in cells)
        # rounded to the second digit of each error
        assert first + sum(steps) == pytest.approx(last, abs=2e-3)
        assert sum(steps) == pytest.approx(total, abs=2e-3)
        b = beams.asymmetry.budget
        assert str(b["unmatched"].shift) in budget_text(result)
        assert total == pytest.approx(b.total.value, abs=1e-3)
    one = run_study(study_files[0], study_plan.with_settings({"beams.luminosity": 0}))
    assert budget_text(one).splitlines()[0].split() == ["beams", "LR"]
