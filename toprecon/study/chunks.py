"""Chunks: the unit of work in a notebook, on the command line and on a cluster.

A chunk is a range of entries of one file. Reconstructing it gives a part of the
event table; summarising the part gives sums; sums of all chunks, added in sorted
order, give the result. A part is written by rename under a name made of the plan's
hash and the chunk, so that an interrupted run goes on where it stopped.
"""

from __future__ import annotations

import dataclasses
import hashlib
import itertools
import json
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import awkward as ak

from toprecon.errors import InputError, StudyError
from toprecon.events import EventTable
from toprecon.io import (
    ChunkRef,
    InputReport,
    SourceDescription,
    read_chunk,
)
from toprecon.study.plan import StudyPlan
from toprecon.study.reading import opened, table_path
from toprecon.study.reconstruction import reconstruct
from toprecon.study.sums import check_plan


def reconstruct_chunk(
    ref: ChunkRef,
    plan: StudyPlan,
    description: SourceDescription,
    *,
    parts: str | Path | None = None,
) -> tuple[EventTable, InputReport]:
    """Read and reconstruct one chunk.

    Parameters
    ----------
    ref : ChunkRef
        Entries of one file, from :meth:`EventSource.references`.
    plan : StudyPlan
        The plan.
    description : SourceDescription
        The source the chunk belongs to, from :attr:`EventSource.description`.
    parts : path, optional
        Folder of finished parts: a valid one is loaded instead of made, a new one
        is saved there.

    Returns
    -------
    tuple
        The event table of the chunk and the report of its reading.
    """
    if parts is None:
        events, report = read_chunk(ref, description)
        return reconstruct(events, plan), report
    target = part_path(ref, plan, parts)
    found = _load_part(target, ref, plan)
    if found is not None:
        return found
    events, report = read_chunk(ref, description)
    table = reconstruct(events, plan)
    table.provenance["part"] = {
        "ref": dataclasses.asdict(ref),
        "report": report.to_mapping(),
    }
    table.save(target)
    return table, report


def part_path(ref: ChunkRef, plan: StudyPlan, parts: str | Path) -> Path:
    """Return the file of a part: hash of the plan, then of the chunk."""
    text = json.dumps(dataclasses.asdict(ref), sort_keys=True)
    chunk = hashlib.sha256(text.encode()).hexdigest()[:16]
    return Path(parts) / f"{plan.reconstruct_hash[:16]}-{chunk}.parquet"


def check_references(refs: Sequence[ChunkRef]) -> None:
    """Check that no entry is covered twice.

    Parameters
    ----------
    refs : sequence of ChunkRef
        All chunks of a study.

    Raises
    ------
    StudyError
        If two chunks of one file overlap.
    """
    ordered = sorted(refs, key=lambda ref: (ref.fingerprint, ref.tree, ref.start))
    for first, second in itertools.pairwise(ordered):
        same = (first.fingerprint, first.tree) == (second.fingerprint, second.tree)
        if same and second.start < first.stop:
            msg = (
                f"{second.path}: every entry may be used once, but the chunks "
                f"[{first.start}, {first.stop}) and [{second.start}, {second.stop}) "
                "overlap; is the same file listed twice?"
            )
            raise StudyError(msg)


def reconstruct_source(
    source: Any, plan: StudyPlan, *, layout: Any = None, catalogue: Any = None
) -> EventTable:
    """Return the event table of whatever a study can be made of.

    Parameters
    ----------
    source : EventSource, EventTable, events, path or list of paths
        Files are reconstructed chunk by chunk; a table, or a saved one, is returned as
        it is.
    plan : StudyPlan
        The plan.
    layout, catalogue : optional
        How to read files, see :func:`toprecon.open_events`.

    Returns
    -------
    EventTable
        All events.

    Raises
    ------
    InputError
        If there are none.
    """
    saved = table_path(source)
    if saved is not None:
        source = EventTable.load(saved)
    if isinstance(source, EventTable):
        check_plan(source, plan)
        return source
    source = opened(source, layout=layout, catalogue=catalogue)
    if isinstance(source, ak.Array):
        return reconstruct(source, plan)
    tables = [reconstruct(events, plan) for events in source.chunks()]
    if not tables:
        msg = f"{source}: at least one event is required; got none"
        raise InputError(msg)
    return EventTable.concatenate(tables)


def _load_part(
    target: Path, ref: ChunkRef, plan: StudyPlan
) -> tuple[EventTable, InputReport] | None:
    """Return a finished part, or nothing if it is absent, damaged or of another plan."""
    if not target.is_file():
        return None
    try:
        table = EventTable.load(target)
        part = table.provenance["part"]
        fits = table.provenance.get("plan_hash") == plan.reconstruct_hash and part[
            "ref"
        ] == dataclasses.asdict(ref)
        return (table, InputReport.from_mapping(part["report"])) if fits else None
    except (InputError, KeyError):
        return None
