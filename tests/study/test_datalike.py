"""What data would show of the selected events."""

from __future__ import annotations

import json
import math
from pathlib import Path

import numpy as np
import pytest

from tests.samples import SAMPLES
from toprecon.errors import OptionError
from toprecon.events import Binning
from toprecon.study import (
    StudyPlan,
    data_like,
    open_events,
    reconstruct_source,
    run_study,
)

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
    pairs = found.stack["lepjets_550"].sum() + found.outside["lepjets_550"]
    assert f"lepjets_550 {pairs:.0f}, " in str(found)


def test_the_cut_on_the_observable_itself_is_not_applied(table):
    found = data_like(table, PLAN, "pairing.chi2")
    assert found.cut is not None
    assert found.cut.high == 15
    assert "by process before the cut on pairing.chi2: " in str(found)
    assert "observed A_FB after it " in str(found)
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


def test_no_truth_is_needed(table):
    data = without_truth(table)
    blind, known = data_like(data, PLAN), data_like(table, PLAN)
    assert blind.to_mapping() == known.to_mapping()
    assert str(blind) == str(known)


def test_a_missing_catalogue_is_said(event_data):
    """Files of others state no cross section of their own."""
    path = event_data / "showered" / "lepjets_500_LR.root"
    table = reconstruct_source(open_events(path, layout=LAYOUT), PLAN)
    found = data_like(table, PLAN)
    assert not found.is_expected
    assert str(found).startswith("sum of weights by process")
    assert "no expected numbers: sample 'lepjets_500_LR' has no cross section" in str(
        found
    )
    assert found.to_mapping()["expected_error"] is None


def test_the_stack_is_the_weighted_sum_of_the_rows(table):
    """Bin by bin, against numpy and weights worked out from the catalogue."""
    found = data_like(table, PLAN.replace(cuts=()), "cos_theta_reco")
    shares = {"LR": 1.8 * 1.3 / 4, "RL": 0.2 * 0.7 / 4}
    expected = np.zeros(len(found.binning))
    for number, sample in enumerate(table.samples):
        sigma = sum(
            share * s
            for share, s, name in (
                (shares["LR"], sample.cross_section_lr, "LR"),
                (shares["RL"], sample.cross_section_rl, "RL"),
            )
            if sample.helicity.name in (name, "MIXED") and not math.isnan(s)
        )
        rows = (table["sample"] == number) & (table["stage"] == 0)
        counts, _ = np.histogram(
            table["cos_theta_reco"][rows], found.binning.array,
            weights=table["weight"][rows],
        )  # fmt: skip
        expected += counts * 500 * sigma / sample.normalisation
    assert found.total == pytest.approx(expected, rel=1e-12)
