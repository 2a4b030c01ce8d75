"""One study gives one set of numbers, however the work is divided."""

from __future__ import annotations

import random
from concurrent.futures import Future, ProcessPoolExecutor, ThreadPoolExecutor

import numpy as np
import pytest

from tests.study.numbers import differences, numbers_of
from toprecon.errors import InputError, StudyError
from toprecon.study import (
    EventTable,
    open_events,
    reconstruct,
    reconstruct_source,
    run_study,
)


@pytest.fixture(scope="module")
def whole(study_files, study_plan):
    """The study with one chunk per file."""
    return run_study(study_files, study_plan)


@pytest.mark.parametrize("size", [1_000, 333, 128])
def test_numbers_do_not_depend_on_the_size_of_chunks(
    size, whole, study_files, study_plan
):
    chunked = run_study(study_files, study_plan, chunk_size=size)
    # sums of some thousand weights in another order: rounding only
    assert not differences(numbers_of(whole), numbers_of(chunked), tolerance=1e-9)


class _Shuffled:
    """An executor that finishes its work in any order, when it is asked to."""

    def __init__(self, seed):
        self.random = random.Random(seed)
        self.jobs = []

    def submit(self, work, *arguments):
        future = Future()
        self.jobs.append((future, work, arguments))
        if len(self.jobs) == 11:  # two files: 900 and 700 in chunks of 150
            self.random.shuffle(self.jobs)
            for done, job, values in self.jobs:
                done.set_result(job(*values))
        return future


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_numbers_are_the_same_bits_for_any_order_of_completion(
    seed, study_files, study_plan
):
    serial = run_study(study_files, study_plan, chunk_size=150)
    executor = _Shuffled(seed)
    shuffled = run_study(study_files, study_plan, chunk_size=150, executor=executor)
    assert len(executor.jobs) == 11
    assert numbers_of(shuffled) == numbers_of(serial)
    assert shuffled.migration.equals(serial.migration)


@pytest.mark.parametrize("kind", [ThreadPoolExecutor, ProcessPoolExecutor])
def test_numbers_are_the_same_bits_in_threads_and_processes(
    kind, study_files, study_plan
):
    serial = run_study(study_files, study_plan, chunk_size=300)
    with kind(max_workers=2) as executor:
        many = run_study(study_files, study_plan, chunk_size=300, executor=executor)
    assert many.to_mapping() == serial.to_mapping()


def test_numbers_are_the_same_on_a_cluster_of_this_machine(study_files, study_plan):
    from tests.require import require

    distributed = require("distributed")
    serial = run_study(study_files, study_plan, chunk_size=400)
    with (
        distributed.LocalCluster(
            n_workers=1,
            threads_per_worker=1,
            processes=False,
            dashboard_address=None,
        ) as cluster,
        distributed.Client(cluster) as client,
    ):
        executor = client.get_executor()
        there = run_study(study_files, study_plan, chunk_size=400, executor=executor)
    assert there.to_mapping() == serial.to_mapping()


def test_events_table_and_files_give_the_same_numbers(
    whole, study_files, study_plan, tmp_path
):
    source = open_events(study_files)
    events = source.read()
    table = reconstruct(events, study_plan)
    path = table.save(tmp_path / "table.parquet")
    for form in (
        source,
        events,
        table,
        path,
        str(path),
        reconstruct_source(source, study_plan),
    ):
        result = run_study(form, study_plan)
        assert numbers_of(result) == numbers_of(whole)


def test_a_single_path_is_enough(study_files, study_plan):
    result = run_study(study_files[0], study_plan)
    assert list(result.by_helicity) == ["LR"]
    assert result.inputs == {study_files[0]: result.inputs[study_files[0]]}


def test_progress_counts_chunks(study_files, study_plan):
    seen = []
    run_study(
        study_files,
        study_plan,
        chunk_size=300,
        progress=lambda done, total: seen.append((done, total)),
    )
    assert seen == [(i + 1, 6) for i in range(6)]


def test_an_error_in_a_worker_arrives(study_files, study_plan):
    source = open_events(study_files)
    with open(study_files[0], "rb") as file:  # noqa: PTH123
        content = file.read()
    try:
        with open(study_files[0], "ab") as file:  # noqa: PTH123
            file.write(b"x")
        with (
            ThreadPoolExecutor(1) as executor,
            pytest.raises(InputError, match="the content must be the one that was op"),
        ):
            run_study(source, study_plan, executor=executor)
    finally:
        with open(study_files[0], "wb") as file:  # noqa: PTH123
            file.write(content)


def test_no_file_is_one_sentence(study_plan):
    with pytest.raises(StudyError, match=r"^study: at least one file is required; got"):
        run_study([], study_plan)


def test_events_without_rows_are_refused(study_files, study_plan):
    events = open_events(study_files).read()[:0]
    with pytest.raises(StudyError, match="at least one event is required; the files"):
        run_study(events, study_plan)


def test_the_step_that_loses_the_last_event_is_named(study_files, study_plan):
    plan = study_plan.with_cut("pairing.chi2", high=-1)
    with pytest.raises(
        StudyError,
        match=r"the step 'pairing.chi2 < -1' leaves none of 1600; loosen it",
    ):
        run_study(study_files, plan)


def test_a_table_of_other_settings_is_refused_by_section(study_files, study_plan):
    table = reconstruct(open_events(study_files).read(), study_plan)
    other = study_plan.with_settings(
        {"pairing.top_mass": "170", "truth.match_angle": "0.2"}
    )
    with pytest.raises(
        StudyError, match="the sections pairing, truth differ; reconstruct the events"
    ):
        run_study(table, other)


def test_reconstruction_does_not_depend_on_neighbours(study_files, study_plan):
    events = open_events(study_files[:1]).read()
    whole = reconstruct(events, study_plan)
    parts = [reconstruct(events[i : i + 71], study_plan) for i in range(0, 900, 71)]
    for name in whole:
        pieces = [part[name] for part in parts]
        joined = np.concatenate(pieces)
        assert joined.tobytes() == whole[name].tobytes(), name


def test_reconstruction_of_no_events_gives_an_empty_table(study_files, study_plan):
    events = open_events(study_files).read()
    table = reconstruct(events[:0], study_plan)
    assert isinstance(table, EventTable)
    assert len(table) == 0
    assert list(table) == list(reconstruct(events[:5], study_plan))


def test_a_worker_is_told_of_its_own_file_only(study_files, study_plan):
    """Descriptions of thousands of files would be sent with every chunk."""
    executor = _Shuffled(1)
    run_study(study_files, study_plan, chunk_size=150, executor=executor)
    for _, _, (ref, description) in executor.jobs:
        assert [file.path for file in description.files] == [ref.path]


def test_results_are_added_as_soon_as_those_before_them_are_there(
    study_files, study_plan, monkeypatch
):
    """Sums of all chunks must not pile up."""
    from toprecon.study import running

    added = []
    original = running.summarise_chunk

    def counting(ref, description, plan, parts=None):
        added.append(("made", ref.start))
        return original(ref, description, plan, parts)

    class Sums(running.InputReport):
        def __add__(self, other):
            added.append(("added", None))
            return super().__add__(other)

    monkeypatch.setattr(running, "summarise_chunk", counting)
    monkeypatch.setattr(running, "InputReport", Sums)
    run_study(study_files[0], study_plan, chunk_size=300)
    kinds = [kind for kind, _ in added]
    assert kinds.index("added") < len(kinds) - 1 - kinds[::-1].index("made")
