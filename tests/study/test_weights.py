"""Weights of expected data: luminosity, cross sections, polarised beams."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from toprecon.errors import StudyError
from toprecon.events import Helicity, Sample
from toprecon.study import StudyPlan, open_events, run_study, sample_factors
from toprecon.study.weights import effective_cross_section

LEFT = Sample(
    "left", "ttbar", Helicity.LR, 500.0, cross_section_lr=1500.0, sum_of_weights=3000.0
)
RIGHT = Sample(
    "right", "ttbar", Helicity.RL, 500.0, cross_section_rl=700.0, sum_of_weights=1000.0
)
BOTH = Sample(
    "ww",
    "ww",
    Helicity.MIXED,
    500.0,
    cross_section_lr=20_000.0,
    cross_section_rl=200.0,
    cross_section=5_050.0,
    sum_of_weights=500.0,
)
polarisation = st.floats(-1, 1)


def _beams(electron=0.0, positron=0.0, luminosity=100.0):
    return StudyPlan().beams.replace(
        electron_polarisation=electron,
        positron_polarisation=positron,
        luminosity=luminosity,
    )


@given(polarisation, polarisation)
def test_pure_samples_follow_the_formula_of_polarised_beams(electron, positron):
    """The formula of G. Moortgat-Pick et al., Phys. Rept. 460 (2008) 131.

    sigma = 1/4 [(1 - P-)(1 + P+) sigma_LR + (1 + P-)(1 - P+) sigma_RL].
    """
    factors = sample_factors([LEFT, RIGHT], _beams(electron, positron))
    assert factors.is_expected
    left = 0.25 * (1 - electron) * (1 + positron) * 1500 * 100 / 3000
    right = 0.25 * (1 + electron) * (1 - positron) * 700 * 100 / 1000
    assert factors.factors["left"] == pytest.approx(left)
    assert factors.factors["right"] == pytest.approx(right)


@given(polarisation, polarisation)
def test_an_unpolarised_sample_is_mixed_from_its_cross_sections(electron, positron):
    sigma = effective_cross_section(BOTH, electron, positron)
    expected = 0.25 * (1 - electron) * (1 + positron) * 20_000
    expected += 0.25 * (1 + electron) * (1 - positron) * 200
    assert sigma == pytest.approx(expected, abs=1e-9)


def test_unpolarised_beams_use_the_cross_section_as_generated():
    only = BOTH.replace(cross_section_lr=math.nan, cross_section_rl=math.nan)
    assert effective_cross_section(only, 0.0, 0.0) == 5_050.0


def test_an_unpolarised_sample_without_helicities_cannot_enter_a_polarised_mix():
    only = BOTH.replace(cross_section_lr=math.nan, cross_section_rl=math.nan)
    with pytest.raises(
        StudyError,
        match=r"sample 'ww': its cross section per helicity is required to mix it into "
        r"beams of polarisation -0.8, 0.3, but the catalogue states none; add "
        r"cross_section_lr and cross_section_rl",
    ):
        sample_factors([LEFT, only], _beams(-0.8, 0.3))


def test_a_polarised_sample_serves_the_beams_it_was_made_for():
    made = BOTH.replace(
        cross_section_lr=math.nan,
        cross_section_rl=math.nan,
        electron_polarisation=-0.8,
        positron_polarisation=0.3,
    )
    assert effective_cross_section(made, -0.8, 0.3) == 5_050.0
    with pytest.raises(StudyError, match="cross section per helicity is required"):
        effective_cross_section(made, 0.0, 0.0)


def test_pure_beams_drop_the_other_helicity():
    factors = sample_factors([LEFT, RIGHT, BOTH], _beams(), polarisations=(-1, 1))
    assert factors.factors == {
        "left": pytest.approx(1500 * 100 / 3000),
        "right": 0.0,
        "ww": pytest.approx(20_000 * 100 / 500),
    }


def test_the_stated_sum_of_weights_is_the_norm():
    stated = LEFT.replace(stated_sum_of_weights=6000.0)
    one = sample_factors([LEFT], _beams(-1, 1)).factors["left"]
    assert sample_factors([stated], _beams(-1, 1)).factors["left"] == one / 2


@pytest.mark.parametrize(
    ("sample", "luminosity", "reason"),
    [
        (LEFT, 0.0, "the plan states no luminosity"),
        (
            LEFT.replace(cross_section_lr=math.nan, cross_section_rl=5.0),
            1.0,
            "sample 'left' has no cross section",
        ),
        (
            BOTH.replace(
                cross_section=math.nan,
                cross_section_lr=math.nan,
                cross_section_rl=math.nan,
            ),
            1.0,
            "sample 'ww' has no cross section",
        ),
    ],
)
def test_without_luminosity_or_cross_section_nothing_is_expected(
    sample, luminosity, reason
):
    factors = sample_factors([sample, RIGHT], _beams(luminosity=luminosity))
    assert not factors.is_expected
    assert factors.reason == reason
    assert set(factors.factors.values()) == {1.0}
    pure = sample_factors(
        [sample, RIGHT], _beams(luminosity=luminosity), polarisations=(-1, 1)
    )
    assert pure.factors == {sample.name: 1.0, "right": 0.0}


def test_a_sample_without_weights_adds_nothing():
    empty = LEFT.replace(sum_of_weights=0.0)
    assert sample_factors([empty], _beams(-1, 1)).factors == {"left": 0.0}


def test_expected_events_of_a_study_are_luminosity_times_cross_section(
    study_files, study_plan
):
    result = run_study(study_files, study_plan)
    samples = {s.name: s for s in open_events(study_files).samples}
    left, right = samples["pairs_LR"], samples["pairs_RL"]
    w_left, w_right = 0.25 * 1.8 * 1.3, 0.25 * 0.2 * 0.7
    expected = 500 * (w_left * left.cross_section_lr + w_right * right.cross_section_rl)
    assert result.beams.is_expected
    assert result.cut_flow.sums[0] == pytest.approx(expected)
    pure = result.by_helicity["LR"]
    assert pure.cut_flow.sums[0] == pytest.approx(500 * left.cross_section_lr)
    assert np.all(np.diff(result.cut_flow.counts) <= 0)


def test_twice_the_luminosity_is_twice_the_events_and_the_same_asymmetry(
    study_files, study_plan
):
    one = run_study(study_files, study_plan)
    two = run_study(study_files, study_plan.with_settings({"beams.luminosity": "1000"}))
    assert np.allclose(two.cut_flow.sums, 2 * one.cut_flow.sums)
    a, b = one.asymmetry, two.asymmetry
    assert b.reconstructed.value == pytest.approx(a.reconstructed.value)
    # the error of the simulated sample stays, that of the data shrinks
    assert b.reconstructed.error == pytest.approx(a.reconstructed.error)
    assert b.expected_error == pytest.approx(a.expected_error / math.sqrt(2))
    assert np.allclose(two.migration.counts, 2 * one.migration.counts)
    assert np.allclose(
        two.migration.counts_variances, 4 * one.migration.counts_variances
    )


def test_without_a_luminosity_expected_numbers_are_missing(study_files, study_plan):
    plan = study_plan.with_settings({"beams.luminosity": "0"})
    result = run_study(study_files, plan)
    assert not result.beams.is_expected
    assert "no expected numbers: the plan states no luminosity" in result.cautions
    data = result.to_mapping()
    assert data["beams"]["expected_error"] is None
    assert data["beams"]["expected"] is False


def test_a_mix_lies_between_the_pure_beams(study_files, study_plan):
    result = run_study(study_files, study_plan)
    left, right = (result.by_helicity[h].asymmetry.generated for h in ("LR", "RL"))
    mixed = result.asymmetry.generated.value
    assert min(left.value, right.value) < mixed < max(left.value, right.value)
