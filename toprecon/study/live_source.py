"""What a live study is fed with: a table, events in memory, or files."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import awkward as ak
import numpy as np

from toprecon.errors import InputError, StudyError
from toprecon.events import EventTable
from toprecon.io import EventSource, InputReport, open_events, read_chunk
from toprecon.study.plan import StudyPlan
from toprecon.study.reading import table_path
from toprecon.study.reconstruction import reconstruct
from toprecon.study.sums import check_plan

CHUNK = 20_000
"""Events per chunk: small, so that progress shows and a stop is quick."""

Report = Callable[[int, int], None]


class LiveSource:
    """A table, or events that can be reconstructed again.

    Parameters
    ----------
    source : EventTable, EventSource, events, path or list of paths
        A path of a saved table is loaded.
    layout, catalogue : optional
        How to read files.
    """

    def __init__(self, source: Any, layout: Any = None, catalogue: Any = None) -> None:
        if not isinstance(source, (EventTable, EventSource, ak.Array)):
            source = _opened(source, layout, catalogue)
        self.source = source
        self._lengths: list[int] = []
        self._chunk: tuple[int, Any] = (0, None)

    @property
    def can_reconstruct(self) -> bool:
        """Whether there are events."""
        return not isinstance(self.source, EventTable)

    @property
    def origin(self) -> tuple[InputReport | None, dict[str, str]]:
        """Report of the reading and fingerprints of the files, if there are files."""
        if isinstance(self.source, EventSource):
            return self.source.report, self.source.fingerprints
        return None, {}

    def table(self, plan: StudyPlan, report: Report) -> EventTable:
        """Reconstruct all events, chunk by chunk.

        Parameters
        ----------
        plan : StudyPlan
            Its reconstruct part is used.
        report : callable
            Called with (events done, events in all) before every chunk and at the
            end; whatever it raises ends the work.

        Returns
        -------
        EventTable
            The table given, if there is one.

        Raises
        ------
        InputError
            If there are no events.
        """
        source = self.source
        if isinstance(source, EventTable):
            check_plan(source, plan)
            return source
        if isinstance(source, ak.Array):
            n = len(source)
            chunks: Any = (source[i : i + CHUNK] for i in range(0, n, CHUNK))
        else:
            n, chunks = source.entries, source.chunks(CHUNK)
        tables = []
        done = 0
        for events in chunks:
            report(done, n)
            tables.append(reconstruct(events, plan))
            done += len(events)
        report(n, n)
        if not tables:
            msg = "study: at least one event is required; the files hold none"
            raise InputError(msg)
        self._lengths = [len(table) for table in tables]
        if isinstance(source, ak.Array):
            return _joined(tables)
        return EventTable.concatenate(tables)

    def event(self, row: int) -> ak.Array:
        """Return the event of a row of the table; its chunk is kept.

        Parameters
        ----------
        row : int
            Row.

        Returns
        -------
        ak.Array, shape (1,)
            The event.

        Raises
        ------
        StudyError
            If there are no events.
        """
        if isinstance(self.source, EventTable):
            msg = (
                "one event: the events are required, but the study was given a saved "
                "table; give it the event files"
            )
            raise StudyError(msg)
        if isinstance(self.source, ak.Array):
            return self.source[row : row + 1]
        start, chunk = self._chunk
        if not start <= row < start + (0 if chunk is None else len(chunk)):
            ends = np.cumsum(self._lengths)
            number = int(np.searchsorted(ends, row, side="right"))
            ref = self.source.references(CHUNK)[number]
            chunk, _ = read_chunk(ref, self.source.description)
            start = int(ends[number]) - self._lengths[number]
            self._chunk = (start, chunk)
        return chunk[row - start : row - start + 1]


def _opened(source: Any, layout: Any, catalogue: Any) -> Any:
    """Return a table or a source for whatever names one."""
    saved = table_path(source)
    if saved is not None:
        return EventTable.load(saved)
    return open_events(source, layout=layout, catalogue=catalogue)


def _joined(tables: list[EventTable]) -> EventTable:
    """Join tables of slices of one array, whose samples describe the whole of it."""
    first = tables[0]
    columns = {n: np.concatenate([t[n] for t in tables]) for n in first.columns}
    return EventTable(columns, first.samples, first.stages, first.provenance)
