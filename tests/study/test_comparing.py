from __future__ import annotations

import numpy as np
import pytest

from toprecon.errors import StudyError
from toprecon.generation import GenerationOptions, generate
from toprecon.study import (
    StudyPlan,
    compare_plans,
    open_events,
    reconstruct,
    reconstruct_source,
    run_study,
)


def test_two_plans_are_compared_on_events_on_a_table_and_on_two_tables(study_plan):
    events = generate(1500, GenerationOptions(helicity="LR"), seed=5)
    plan = StudyPlan()
    index = [t.name for t in plan.pairing.terms].index("leptonic_top_mass")
    other = plan.with_settings({f"pairing.terms.{index}.on": False})
    found = compare_plans(events, plan, other)
    tables = (reconstruct(events, plan), reconstruct(events, other))
    same = compare_plans(tables, plan, other)
    for name, d in found.differences.items():
        assert d == same[name]
        for side, table, p in zip(
            (d.first, d.second), tables, (plan, other), strict=True
        ):
            r = getattr(run_study(table, p).asymmetry, name)
            assert side.value == pytest.approx(r.value, abs=1e-12)
    assert found.moved.value > 0
    tight = plan.with_cut("pairing.chi2", high=5)
    on_table = compare_plans(tables[0], plan, tight)
    assert on_table.selected_second == 0
    assert on_table.selected_first > 0
    assert on_table["generated"].difference.value == 0
    with pytest.raises(StudyError, match="a table for each is required; got one"):
        compare_plans(tables[0], plan, other)


def test_beams_choose_the_rows_compared(study_files, study_plan):
    mixed = reconstruct_source(study_files, study_plan)
    tight = study_plan.with_cut("pairing.chi2", high=5)
    found = compare_plans(mixed, study_plan, tight, beams="RL")
    r = run_study(mixed, study_plan).by_helicity["RL"].asymmetry
    assert found["reconstructed"].first.value == pytest.approx(r.reconstructed.value)
    assert np.isfinite(found["reconstructed"].difference.error)


def test_files_are_compared_like_events(study_files, study_plan):
    other = study_plan.with_settings({"pairing.top_mass": 174.5})
    first = compare_plans(study_files, study_plan, other)
    source = open_events(study_files)
    for same in (source, source.read()):
        second = compare_plans(same, study_plan, other)
        assert second.differences == first.differences
        assert second.moved == first.moved
    cuts = study_plan.with_cut("pairing.chi2", high=5)
    one = compare_plans(str(study_files[0]), study_plan, cuts, beams="LR")
    assert one.selected_first > 0 == one.selected_second


def test_a_saved_table_is_compared_like_the_table(study_files, study_plan, tmp_path):
    table = reconstruct_source(study_files, study_plan)
    path = table.save(tmp_path / "table.parquet")
    cuts = study_plan.with_cut("pairing.chi2", high=5)
    expected = compare_plans(table, study_plan, cuts)
    for source in (path, [str(path)]):
        found = compare_plans(source, study_plan, cuts)
        assert found.differences == expected.differences
    other = study_plan.with_settings({"pairing.top_mass": 174.5})
    with pytest.raises(StudyError, match="a table for each is required; got one"):
        compare_plans(path, study_plan, other)
    again = reconstruct_source(path, study_plan)
    for name in table:
        assert np.array_equal(again[name], table[name], equal_nan=True)
