from __future__ import annotations

import pytest

from toprecon.errors import MissingFieldError, OptionError, StudyError
from toprecon.study import (
    EventTable,
    ScanAxis,
    ScanOptions,
    StudyPlan,
    open_events,
    run_study,
    scan_cuts,
)
from toprecon.study.chunks import reconstruct_source


@pytest.fixture(scope="module")
def mixed(study_files, study_plan):
    """Both helicities in one table, with cross sections."""
    table = reconstruct_source(open_events(study_files), study_plan)
    samples = tuple(
        s.replace(cross_section_lr=1500.0, cross_section_rl=700.0)
        for s in table.samples
    )
    return EventTable(table.columns, samples, table.stages, table.provenance)


def axes_of(table):
    chi2 = table["pairing.chi2"]
    return (
        ScanAxis.spread("pairing.chi2", chi2, n=8),
        ScanAxis(observable="pairing.gap", points=(0.0, 1.0), keep="above"),
    )


@pytest.mark.parametrize("beams", ["plan", "LR", "RL"])
def test_every_point_is_a_study_with_the_cuts_of_the_point(mixed, study_plan, beams):
    scan = scan_cuts(mixed, study_plan, *axes_of(mixed), beams=beams)
    for index in ((2, 0), (5, 1), (7, 0)):
        point = scan.point(*index)
        plan = study_plan.with_cuts(point.cuts)
        result = run_study(mixed, plan)
        found = result.beams if beams == "plan" else result.by_helicity[beams]
        a, v = found.asymmetry, scan.everything
        assert v.bias[index] == pytest.approx(a.total_shift.value, abs=1e-12)
        assert v.bias_error[index] == pytest.approx(a.total_shift.error, rel=1e-9)
        assert v.efficiency[index] == pytest.approx(a.efficiency.value)
        assert v.expected_error[index] == pytest.approx(a.expected_error)
        assert v.selected_sum[index] == pytest.approx(a.selected_sum)
        assert v.rows[index] == found.cut_flow.counts[-1]


def test_the_best_point_goes_into_the_plan_in_one_call(mixed, study_plan):
    scan = scan_cuts(
        mixed, study_plan, *axes_of(mixed), options=ScanOptions(fewest_rows=20)
    )
    plan = study_plan.with_cuts(scan.best.cuts)
    assert [cut.observable for cut in plan.cuts] == ["pairing.chi2", "pairing.gap"]
    assert plan.cuts[0].high == scan.best.cuts[0][2]  # the old cut is replaced
    assert plan.cuts[1].low == scan.best.cuts[1][1]


def test_cuts_on_other_observables_stay(mixed, study_plan):
    gap = ScanAxis(observable="pairing.gap", points=(-1.0,), keep="above")
    with_cut = scan_cuts(mixed, study_plan, gap).everything.rows[0, 0]
    without = scan_cuts(mixed, StudyPlan(), gap).everything.rows[0, 0]
    assert with_cut < without


def test_wrong_scans_are_explained(mixed, study_plan):
    axis = ScanAxis(observable="pairing.chi", points=(1.0,))
    with pytest.raises(MissingFieldError, match=r"did you mean 'pairing\.chi2'"):
        scan_cuts(mixed, study_plan, axis)
    good = ScanAxis(observable="pairing.chi2", points=(1.0,))
    with pytest.raises(OptionError, match="beams: must be one of plan, LR, RL; got"):
        scan_cuts(mixed, study_plan, good, beams="left")
    other = study_plan.with_settings({"pairing.cap": 5})
    with pytest.raises(StudyError, match="must be made with the settings of this pla"):
        scan_cuts(mixed, other, good)
