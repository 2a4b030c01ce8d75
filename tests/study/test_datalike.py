"""What data would show, and the unmatched share from the tail of the score."""

from __future__ import annotations

import json
import math
from pathlib import Path

import numpy as np
import pytest

from toprecon.errors import OptionError, StudyError
from toprecon.events import Binning
from toprecon.study import (
    StudyPlan,
    data_like,
    open_events,
    reconstruct_source,
    run_study,
    unmatched_from_tail,
)

SAMPLES = Path(__file__).parents[2] / "sample_events"
LAYOUT = Path(__file__).parents[1] / "io" / "layouts" / "showered.toml"
PLAN = (
    StudyPlan()
    .with_settings(
        {
            "beams.luminosity": 500,
            "beams.electron_polarisation": -0.8,
            "beams.positron_polarisation": 0.3,
        }
    )
    .with_cut("pairing.chi2", high=15)
)


@pytest.fixture(scope="module")
def table():
    """All samples of the lower energy, backgrounds included."""
    return reconstruct_source(open_events(SAMPLES / "catalogue.toml"), PLAN)


def test_the_stack_is_what_the_study_selects(table):
    found = data_like(table, PLAN, "cos_theta_reco")
    result = run_study(table, PLAN)
    total = found.total.sum() + sum(found.outside.values())
    assert total == pytest.approx(result.asymmetry.selected_sum, rel=1e-12)
    assert found.asymmetry.value == pytest.approx(
        result.asymmetry.reconstructed.value, abs=1e-12
    )
    assert found.expected_error == pytest.approx(result.asymmetry.expected_error)
    assert found.is_expected
    assert found.cut is None
    assert list(found.stack) == [
        "lepjets_550", "dilepton_550", "hadronic_550", "ww", "zz", "bb", "qq"
    ]  # fmt: skip
    json.dumps(found.to_mapping(), allow_nan=False)
    assert "in data +-" in str(found)


def test_the_cut_on_the_observable_itself_is_not_applied(table):
    found = data_like(table, PLAN, "pairing.chi2")
    assert found.cut is not None
    assert found.cut.high == 15
    without = run_study(table, PLAN.replace(cuts=())).asymmetry.selected_sum
    total = found.total.sum() + sum(found.outside.values())
    assert total == pytest.approx(without, rel=1e-12)
    assert sum(found.outside.values()) > 0
    few = data_like(table, PLAN, binning=Binning.of([0, 15]), beams="LR")
    pure = run_study(table, PLAN).by_helicity["LR"].asymmetry.selected_sum
    assert few.total[0] == pytest.approx(pure, rel=1e-12)


def test_missing_luminosity_is_said(table):
    plan = PLAN.with_settings({"beams.luminosity": 0})
    found = data_like(table, plan)
    assert not found.is_expected
    assert math.isnan(found.expected_error)
    assert "no expected numbers: the plan states no luminosity" in str(found)


def test_unknown_observables_are_answered_with_the_nearest(table):
    with pytest.raises(OptionError, match=r"pairing.chi2"):
        data_like(table, PLAN, "pairing.chi")


def without_truth(table):
    """The table as data would give it."""
    columns = dict(table.columns)
    columns["is_signal"] = np.zeros(len(table), dtype=bool)
    for name in columns:
        if name.startswith(("cos_theta_true", "cos_theta_ch", "cos_theta_cl")):
            columns[name] = np.full(len(table), np.nan)
    return type(table)(columns, table.samples, table.stages, table.provenance)


def test_data_without_truth_are_fitted_and_the_check_is_missing(table):
    data = without_truth(table)
    assert data_like(data, PLAN).total == pytest.approx(data_like(table, PLAN).total)
    found = unmatched_from_tail(table, PLAN, data=data, beams="RL")
    known = unmatched_from_tail(table, PLAN, data=table, beams="RL")
    assert found.unmatched == known.unmatched
    assert math.isnan(found.pull)
    assert not math.isnan(known.pull)
    assert "no truth to check it with" in str(found)
    with pytest.raises(StudyError, match="matched signal events with truth"):
        unmatched_from_tail(data, PLAN)


def test_an_unsure_background_makes_the_share_less_sure(table):
    errors = [
        unmatched_from_tail(table, PLAN, background_error=e).unmatched.error
        for e in (0.0, 1.0)
    ]
    assert errors[1] > errors[0] > 0


@pytest.mark.parametrize("beams", ["plan", "LR", "RL"])
def test_the_share_agrees_with_truth_under_backgrounds(table, beams):
    """Within 3 errors of fit and truth (fails 1 in 370 where errors are right)."""
    found = unmatched_from_tail(table, PLAN, beams=beams)
    assert abs(found.unmatched.value - found.true.value) < 3 * math.hypot(
        found.unmatched.error, found.true.error
    )
    parts = np.sum(list(found.parts.values()), axis=0)
    assert parts == pytest.approx(found.expected)


@pytest.mark.parametrize("helicity", ["LR", "RL"])
def test_the_share_agrees_with_truth_on_showered_events(event_data, helicity):
    """Within 3 errors, on half B, templates from half A (fails 1 in 370)."""
    path = event_data / "showered" / f"lepjets_500_{helicity}.root"
    plan = StudyPlan()
    found = reconstruct_source(open_events(path, layout=LAYOUT), plan)
    tail = unmatched_from_tail(found, plan)
    assert abs(tail.pull) < 3
    assert tail.unmatched.error < 0.03
    assert tail.true.value == pytest.approx(0.28, abs=0.03)
    assert tail.chi2 < tail.degrees + 4 * math.sqrt(2 * tail.degrees)
    # one tenth of the matched and a larger part of the unmatched
    assert 0.1 < tail.beyond.value < 0.3


def test_bins_are_fewer_where_few_weights_dominate(table):
    mixed = unmatched_from_tail(table, PLAN)
    plain = unmatched_from_tail(table, PLAN, beams="RL")
    assert len(mixed.binning) < len(plain.binning)
