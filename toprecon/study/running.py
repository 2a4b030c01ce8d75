"""A whole study in one call: files, events or a table in, result out."""

from __future__ import annotations

import functools
import os
from collections.abc import Callable, Iterable, Sequence
from concurrent.futures import Executor, as_completed
from pathlib import Path
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
from toprecon.study.reconstruction import reconstruct
from toprecon.study.result import StudyResult, finish
from toprecon.study.sums import StudySums, merge, summarise

CHUNK_SIZE = 50_000
"""Events per chunk: the fastest size that keeps memory small."""

Progress = Callable[[int, int], Any]


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
        if len(paths) == 1 and _is_table(paths[0]):
            return finish(summarise(EventTable.load(paths[0]), plan), plan)
        one = paths[0] if len(paths) == 1 else paths  # one path may be a catalogue
        source = open_events(one, layout=layout, catalogue=catalogue)
    refs = source.references(chunk_size)
    check_references(refs)
    sums: dict[ChunkRef, StudySums] = {}
    reports: dict[ChunkRef, InputReport] = {}
    work = functools.partial(
        summarise_chunk,
        plan=plan,
        description=source.description,
        parts=None if parts is None else os.fspath(parts),
    )
    for ref, (part, report) in _results(refs, work, executor):
        sums[ref], reports[ref] = part, report
        if progress is not None:
            progress(len(sums), len(refs))
    total = InputReport(messages=source.description.messages)
    for ref in sorted(reports):
        total = total + reports[ref]
    return finish(merge(sums), plan, report=total, inputs=source.fingerprints)


def summarise_chunk(
    ref: ChunkRef,
    plan: StudyPlan,
    description: SourceDescription,
    parts: str | None = None,
) -> tuple[StudySums, InputReport]:
    """Reconstruct and sum one chunk; what a worker does.

    Parameters
    ----------
    ref : ChunkRef
        Entries of one file.
    plan : StudyPlan
        The plan.
    description : SourceDescription
        The source the chunk belongs to.
    parts : str, optional
        Folder of finished parts.

    Returns
    -------
    tuple
        Sums and the report of the reading.
    """
    table, report = reconstruct_chunk(ref, plan, description, parts=parts)
    return summarise(table, plan), report


def _results(
    refs: Sequence[ChunkRef],
    work: Callable[[ChunkRef], tuple[StudySums, InputReport]],
    executor: Executor | None,
) -> Iterable[tuple[ChunkRef, tuple[StudySums, InputReport]]]:
    """Work through the chunks, in order or as they are completed."""
    if executor is None:
        for ref in refs:
            yield ref, work(ref)
        return
    futures = {executor.submit(work, ref): ref for ref in refs}
    try:
        for future in as_completed(futures):
            yield futures[future], future.result()
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


def _is_table(path: str) -> bool:
    """Whether a path names a saved event table."""
    if Path(path).suffix != ".parquet" or not Path(path).is_file():
        return False
    return EventTable.is_saved(path)
