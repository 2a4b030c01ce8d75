from __future__ import annotations

import math

import pytest

from toprecon.errors import StudyError
from toprecon.study import (
    BeamRun,
    EventTable,
    bias_meaning,
    helicity_summary,
    open_events,
    result_mapping,
    result_text,
    run_study,
)
from toprecon.study.chunks import reconstruct_source


def with_samples(table, **changes):
    samples = tuple(s.replace(**changes) for s in table.samples)
    return EventTable(table.columns, samples, table.stages, table.provenance)


@pytest.fixture(scope="module")
def plain(study_files, study_plan):
    return reconstruct_source(open_events(study_files), study_plan)


@pytest.fixture(scope="module")
def priced(plain):
    """With the cross sections of both helicities."""
    return with_samples(plain, cross_section_lr=1500.0, cross_section_rl=700.0)


@pytest.fixture(scope="module")
def priceless(plain):
    """Without any cross section."""
    return with_samples(
        plain,
        cross_section_lr=math.nan,
        cross_section_rl=math.nan,
        cross_section=math.nan,
    )


def test_a_bias_is_told_in_errors_of_the_expected_data(priced, study_plan):
    result = run_study(priced, study_plan)
    found = bias_meaning(result)
    a = result.asymmetry
    assert found.bias == a.total_shift
    assert found.standard_deviations.value == pytest.approx(
        a.total_shift.value / a.expected_error
    )
    left = bias_meaning(result, "LR", quantity="shift")
    shift = result.by_helicity["LR"].asymmetry.shift
    assert left.bias == shift
    # +0.00314 per +1 % of the axial coupling to the Z, own calculation; derivative
    # against full step: 1 %
    assert left.couplings["f1a_z"].relative == pytest.approx(
        shift.value / 0.314, rel=0.02
    )


def test_without_a_mix_only_pure_beams_have_a_meaning(priceless, study_plan):
    result = run_study(priceless, study_plan)
    with pytest.raises(StudyError, match="the mix of beams must be known; sample"):
        bias_meaning(result)
    found = bias_meaning(result, "RL")
    assert math.isnan(found.standard_deviations.value)
    assert math.isfinite(found.couplings["f1v_z"].shift.value)


def test_one_helicity_alone_says_which_beams(priceless, study_plan):
    left = priceless.take(priceless["sample"] == 0)
    alone = EventTable(left.columns, left.samples[:1], left.stages, left.provenance)
    result = run_study(alone, study_plan)
    found, same = bias_meaning(result), bias_meaning(result, "LR")
    assert found.couplings == same.couplings
    with pytest.raises(StudyError, match="a sample of helicity RL is required"):
        bias_meaning(result, "RL")
    with pytest.raises(StudyError, match="there is none of RL"):
        helicity_summary(result)


def test_several_energies_have_no_single_meaning(priced, study_plan):
    one, two = priced.samples
    table = EventTable(
        priced.columns,
        (one, two.replace(sqrt_s=1000.0)),
        priced.stages,
        priced.provenance,
    )
    with pytest.raises(StudyError, match="signal of one known collision energy is r"):
        bias_meaning(run_study(table, study_plan))


def test_both_helicities_are_summarised(priced, priceless, study_plan):
    result = run_study(priced, study_plan)
    found = helicity_summary(result)
    left = result.by_helicity["LR"].asymmetry
    assert found["A_L"].value == pytest.approx(left.generated.value, abs=1e-12)
    # the truth phase space is a part of all decays, so this is a part of 1500 fb
    assert 0 < found["sigma_L"].value < 1500
    explicit = helicity_summary(
        result,
        [
            BeamRun(
                electron_polarisation=sign * -0.8,
                positron_polarisation=sign * 0.3,
                luminosity=250.0,
            )
            for sign in (1, -1)
        ],
    )
    assert found.covariance == pytest.approx(explicit.covariance)
    with pytest.raises(StudyError, match="cross sections per helicity: sample"):
        helicity_summary(run_study(priceless, study_plan))


def test_errors_of_the_polarisation_are_what_another_polarisation_does(
    priced, study_plan
):
    errors = {
        "beams.electron_polarisation_error": 0.002,
        "beams.positron_polarisation_error": 0.003,
    }
    plan = study_plan.with_settings(errors)
    result = run_study(priced, plan)
    effect = result.beams.polarisation
    assert run_study(priced, study_plan).beams.polarisation is None
    for name in ("reconstructed", "generated", "total_shift"):
        squares = 0.0
        for which, size in (("electron", 0.002), ("positron", 0.003)):
            value = getattr(plan.beams, f"{which}_polarisation")
            ends = []
            for sign in (1, -1):
                moved = plan.with_settings(
                    {f"beams.{which}_polarisation": value + sign * size}
                )
                ends.append(getattr(run_study(priced, moved).asymmetry, name).value)
            change = (ends[0] - ends[1]) / 2
            # central differences over the error itself: bends by less than 1e-3
            assert getattr(effect, which)[name] * size == pytest.approx(
                change, rel=1e-3, abs=1e-9
            )
            squares += change**2
        assert effect.error(name) == pytest.approx(math.sqrt(squares), rel=1e-3)
    assert "error from the polarisations" in result_text(result)
    mapping = result_mapping(result)["beams"]
    assert mapping["polarisation_error"] == effect.error("reconstructed")


def test_unknown_mixes_and_full_polarisation_are_no_problem(
    priced, priceless, study_plan
):
    plan = study_plan.with_settings({"beams.electron_polarisation_error": 0.002})
    assert run_study(priceless, plan).beams.polarisation is None
    full = plan.with_settings({"beams.electron_polarisation": -1.0})
    effect = run_study(priced, full).beams.polarisation
    assert math.isfinite(effect.error("reconstructed"))


def test_both_estimators_are_reported_in_the_range_of_the_plan(priced, study_plan):
    plan = study_plan.with_settings({"asymmetry.largest_cosine": 0.9})
    result = run_study(priced, plan)
    found = result.estimators
    mapping = result_mapping(result)
    numbers = mapping["beams"]["estimators"]
    assert numbers["largest_cosine"] == 0.9
    assert numbers["fit"]["extrapolated"]["value"] == found.fit.extrapolated.value
    assert numbers["counting"]["in_range"]["value"] == found.counting.in_range.value
    left = result.by_helicity["LR"].asymmetry.estimators(plan.asymmetry)
    assert mapping["by_helicity"]["LR"]["estimators"]["correlation"] == left.correlation
    assert "|cos| < 0.9, extrapolated: counting" in result_text(result)
    assert type(plan).from_toml(plan.to_toml()) == plan
