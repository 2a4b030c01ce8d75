from __future__ import annotations

import numpy as np
import pytest

from toprecon.events import Status
from toprecon.study import StudyPlan, apply_cuts, open_events, passes_cut, reconstruct
from toprecon.study.cutting import RECONSTRUCTED_STEP, is_reconstructed


@pytest.fixture
def table(study_files, study_plan):
    return reconstruct(open_events(study_files).read()[:300], study_plan)


def test_low_is_kept_and_high_is_dropped(table):
    values = np.linspace(0, 10, len(table)).astype(np.float32)
    table.columns["pairing.chi2"] = values
    low, high = float(values[7]), float(values[20])
    cut = StudyPlan().with_cut("pairing.chi2", low, high).cuts[0]
    keep = passes_cut(table, cut)
    assert np.flatnonzero(keep).tolist() == list(range(7, 20))


def test_an_undefined_value_fails_every_cut(table):
    values = table["pairing.chi2"]
    values[3], values[4], values[5] = np.nan, np.inf, -np.inf
    for limits in ({}, {"low": -1e30}, {"high": 1e30}):
        cut = StudyPlan().with_cut("pairing.chi2", **limits).cuts[0]
        assert not passes_cut(table, cut)[3]
    anything = StudyPlan().with_cut("pairing.chi2").cuts[0]
    assert passes_cut(table, anything)[[4, 5]].all()


def test_the_flow_continues_that_of_the_selection(table):
    plan = (
        StudyPlan()
        .with_cut("pairing.chi2", high=20)
        .with_cut("pairing.w_mass", 75, 85)
        .with_cut("pairing.gap", 1, on=False)
    )
    cutting = apply_cuts(table, plan)
    assert cutting.steps == (
        *table.stages,
        RECONSTRUCTED_STEP,
        "pairing.chi2 < 20",
        "75 <= pairing.w_mass < 85",
    )
    first = len(table.stages)
    lost = table["stage"] > 0
    assert np.array_equal(cutting.stage[lost], table["stage"][lost])
    passed = ~lost & is_reconstructed(table)
    chi2 = table["pairing.chi2"] < 20
    mass = (table["pairing.w_mass"] >= 75) & (table["pairing.w_mass"] < 85)
    assert np.array_equal(cutting.stage == first + 2, passed & ~chi2)
    assert np.array_equal(cutting.stage == first + 3, passed & chi2 & ~mass)
    assert np.array_equal(cutting.selected, passed & chi2 & mass)
    assert 0 < cutting.selected.sum() < len(table)


def test_the_table_is_not_changed_by_cuts(table):
    before = table["stage"].copy()
    apply_cuts(table, StudyPlan().with_cut("pairing.chi2", high=0.1))
    assert np.array_equal(table["stage"], before)


def test_events_without_a_pair_or_an_angle_are_lost_at_their_own_step(table):
    table.columns["stage"][:] = 0
    table.columns["status"][:] = Status.OK
    table.columns["status"][0] = Status.NO_NEUTRINO
    table.columns["cos_theta_reco"][:] = 0.5
    table.columns["cos_theta_reco"][1] = np.nan
    cutting = apply_cuts(table, StudyPlan())
    assert cutting.stage[:3].tolist() == [len(table.stages) + 1] * 2 + [0]
