"""A whole study in one call: files, events or a table in, result out."""

from __future__ import annotations

import dataclasses
import functools
import os
from collections.abc import Callable, Iterable, Mapping, Sequence
from concurrent.futures import Executor, as_completed
from typing import Any

import awkward as ak

from toprecon.errors import StudyError
from toprecon.events import EventTable
from toprecon.io import (
    ChunkRef,
    EventSource,
    InputReport,
    SourceDescription,
    open_events,
)
from toprecon.study.chunks import check_references, reconstruct_chunk
from toprecon.study.plan import StudyPlan
from toprecon.study.reading import table_path
from toprecon.study.reconstruction import reconstruct
from toprecon.study.result import StudyResult, finish
from toprecon.study.sums import StudySums, merge, summarise

CHUNK_SIZE = 50_000
"""Events per chunk: the fastest size that keeps memory small."""

Progress = Callable[[int, int], Any]
_Outcome = tuple[StudySums, InputReport]


def run_study(
    source: Any,
    plan: StudyPlan,
    *,
    layout: Any = None,
    catalogue: Any = None,
    chunk_size: int = CHUNK_SIZE,
    executor: Executor | None = None,
    parts: str | os.PathLike[str] | None = None,
    progress: Progress | None = None,
) -> StudyResult:
    """Carry out a study.

    Parameters
    ----------
    source : EventSource, EventTable, events, path or list of paths
        What to study. A table, or the path of a saved one, skips the reconstruction.
    plan : StudyPlan
        Every setting.
    layout, catalogue : optional
        How to read files, see :func:`toprecon.open_events`.
    chunk_size : int
        Events read and reconstructed at a time; it bounds the memory and does not
        change the result.
    executor : concurrent.futures.Executor, optional
        Works on several chunks at once, in threads, processes or on a cluster.
    parts : path, optional
        Folder for finished parts; a later run with the same plan and files goes on
        from there.
    progress : callable, optional
        Called with (chunks done, chunks in all).

    Returns
    -------
    StudyResult
        The same numbers for any executor.

    Raises
    ------
    StudyError
        If no event is left, or chunks overlap.
    """
    if isinstance(source, EventTable):
        return finish(summarise(source, plan), plan)
    if isinstance(source, ak.Array):
        return finish(summarise(reconstruct(source, plan), plan), plan)
    if not isinstance(source, EventSource):
        paths = _paths(source)
        saved = table_path(paths)
        if saved is not None:
            return finish(summarise(EventTable.load(saved), plan), plan)
        source = open_events(paths, layout=layout, catalogue=catalogue)
    refs = sorted(source.references(chunk_size))
    check_references(refs)
    description = source.description
    # a worker is told of its own file only: there may be thousands
    alone = {
        file.key: dataclasses.replace(description, files=(file,), messages=())
        for file in description.files
    }
    work = functools.partial(
        summarise_chunk, plan=plan, parts=None if parts is None else os.fspath(parts)
    )
    jobs = {ref: alone[(ref.path, ref.tree, ref.fingerprint)] for ref in refs}
    sums, report = _added(_results(jobs, work, executor), refs, progress)
    report = InputReport(messages=description.messages) + report
    return finish(sums, plan, report=report, inputs=source.fingerprints)


def summarise_chunk(
    ref: ChunkRef,
    description: SourceDescription,
    plan: StudyPlan,
    parts: str | None = None,
) -> tuple[StudySums, InputReport]:
    """Reconstruct and sum one chunk; what a worker does.

    Parameters
    ----------
    ref : ChunkRef
        Entries of one file.
    description : SourceDescription
        The source the chunk belongs to; of its files, this one is enough.
    plan : StudyPlan
        The plan.
    parts : str, optional
        Folder of finished parts.

    Returns
    -------
    tuple
        Sums and the report of the reading.
    """
    table, report = reconstruct_chunk(ref, plan, description, parts=parts)
    return summarise(table, plan), report


def _added(
    results: Iterable[tuple[ChunkRef, _Outcome]],
    refs: Sequence[ChunkRef],
    progress: Progress | None,
) -> _Outcome:
    """Add results in the order of ``refs``, keeping only those that come too early."""
    early: dict[ChunkRef, _Outcome] = {}
    total: StudySums | None = None
    report = InputReport()
    position = 0
    for done, (ref, outcome) in enumerate(results, 1):
        early[ref] = outcome
        while position < len(refs) and refs[position] in early:
            sums, part = early.pop(refs[position])
            total = sums if total is None else total + sums
            report = report + part
            position += 1
        if progress is not None:
            progress(done, len(refs))
    if total is None:
        total = merge({})  # says that there is nothing
    return total, report


def _results(
    jobs: Mapping[ChunkRef, SourceDescription],
    work: Callable[[ChunkRef, SourceDescription], _Outcome],
    executor: Executor | None,
) -> Iterable[tuple[ChunkRef, _Outcome]]:
    """Work through the chunks, in order or as they are completed."""
    if executor is None:
        for ref, description in jobs.items():
            yield ref, work(ref, description)
        return
    futures = {executor.submit(work, ref, d): ref for ref, d in jobs.items()}
    try:
        for future in as_completed(list(futures)):
            yield futures.pop(future), future.result()  # forgotten once it is added
    finally:
        for future in futures:
            future.cancel()


def _paths(source: Any) -> list[str]:
    """Paths as a list of text."""
    if isinstance(source, (str, os.PathLike)):
        return [os.fspath(source)]
    paths = [os.fspath(path) for path in source]
    if not paths:
        msg = "study: at least one file is required; got none"
        raise StudyError(msg)
    return paths
