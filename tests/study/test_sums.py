from __future__ import annotations

import itertools

import numpy as np
import pytest

from tests.study.numbers import differences, numbers_of
from toprecon.errors import InputError, StudyError
from toprecon.events import EventTable
from toprecon.study import (
    StudyPlan,
    finish,
    merge,
    open_events,
    reconstruct,
    summarise,
)


@pytest.fixture
def parts(study_files, study_plan):
    """Tables of five chunks, by reference."""
    source = open_events(study_files)
    refs = source.references(400)
    tables = [reconstruct(events, study_plan) for events in source.chunks(400)]
    return dict(zip(refs, tables, strict=True))


def test_merging_gives_the_same_bits_in_any_order(parts, study_plan):
    sums = {ref: summarise(table, study_plan) for ref, table in parts.items()}
    expected = None
    for order in itertools.islice(itertools.permutations(sums), 0, 120, 17):
        total = merge({ref: sums[ref] for ref in order})
        numbers = numbers_of(finish(total, study_plan))
        arrays = [
            array.tobytes()
            for part in total.samples.values()
            for array in (
                part.asymmetry.first,
                part.asymmetry.second,
                part.asymmetry.counts,
                *part.migration.arrays.values(),
            )
        ]
        assert expected in (None, (numbers, arrays))
        expected = (numbers, arrays)


def test_sums_of_parts_are_sums_of_the_whole(parts, study_plan):
    whole = summarise(EventTable.concatenate(list(parts.values())), study_plan)
    sums = merge({ref: summarise(t, study_plan) for ref, t in parts.items()})
    first, second = (numbers_of(finish(s, study_plan)) for s in (whole, sums))
    assert not differences(first, second, tolerance=1e-9)  # rounding of long sums


def test_every_row_is_counted_once(parts, study_plan):
    sums = merge({ref: summarise(t, study_plan) for ref, t in parts.items()})
    flows = [part.cut_flow for part in sums.samples.values()]
    assert [flow.counts[0] for flow in flows] == [900, 700]
    for part in sums.samples.values():
        steps = len(next(iter(parts.values())).stages)
        assert part.statuses.sum() == part.cut_flow.counts[steps]


def test_undefined_values_are_counted_where_they_cost_an_event(parts, study_plan):
    table = next(iter(parts.values()))
    selected = np.flatnonzero(table["stage"] == 0)
    table.columns["pairing.gap"][selected[:5]] = np.nan
    table.columns["pairing.chi2"][selected] = 1.0
    table.columns["pairing.chi2"][selected[0]] = 1e6  # lost before the second cut
    plan = study_plan.with_cut("pairing.gap", low=0)
    result = finish(summarise(table, plan), plan)
    assert result.undefined == {"pairing.chi2": 0, "pairing.gap": 4}


def test_sums_of_different_plans_cannot_be_added_or_finished(parts, study_plan):
    table = next(iter(parts.values()))
    other = study_plan.with_cut("pairing.chi2", high=3)
    with pytest.raises(StudyError, match="made with different plans; they cannot"):
        summarise(table, study_plan) + summarise(table, other)
    with pytest.raises(StudyError, match="made with another plan; summarise the table"):
        finish(summarise(table, study_plan), other)


def test_a_table_of_another_plan_is_refused(parts):
    table = next(iter(parts.values()))
    with pytest.raises(StudyError, match="the sections selection differ"):
        summarise(table, StudyPlan().with_settings({"selection.btag_high": "0.9"}))


def test_samples_of_one_name_must_be_alike(parts, study_plan):
    first, second, *_ = parts.values()
    changed = EventTable(
        second.columns,
        tuple(s.replace(sqrt_s=600.0) for s in second.samples),
        second.stages,
        second.provenance,
    )
    with pytest.raises(InputError, match="sample 'pairs_LR': its parts must be desc"):
        summarise(first, study_plan) + summarise(changed, study_plan)


def test_nothing_to_merge_is_one_sentence():
    with pytest.raises(StudyError, match="at least one event is required; the files"):
        merge({})
