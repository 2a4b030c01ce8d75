"""What a live study has worked out: tables, sums and results, kept for a while."""

from __future__ import annotations

import threading
from collections import OrderedDict
from typing import Any

from toprecon.events import EventTable
from toprecon.study.distributions import TableMasks
from toprecon.study.live_source import LiveSource, Report
from toprecon.study.moving import moved_sums
from toprecon.study.plan import StudyPlan
from toprecon.study.result import StudyResult, finish
from toprecon.study.sums import StudySums, check_plan, summarise

TABLES_KEPT = 3
RESULTS_KEPT = 64


class LiveResults:
    """Results of plans, found or made.

    Parameters
    ----------
    source : LiveSource
        What is studied.
    plan : StudyPlan
        The first plan; a table given as source must have been made with it.
    lock : RLock
        Held while the caches are touched, never while something is worked out.
    """

    def __init__(
        self, source: LiveSource, plan: StudyPlan, lock: threading.RLock
    ) -> None:
        self._source = source
        self._lock = lock
        self._tables: OrderedDict[str, EventTable] = OrderedDict()
        self._results: OrderedDict[str, StudyResult] = OrderedDict()
        self._masks: tuple[EventTable, TableMasks] | None = None
        self._sums: tuple[StudyPlan, StudySums] | None = None
        if isinstance(source.source, EventTable):
            check_plan(source.source, plan)
            self._tables[plan.reconstruct_hash] = source.source

    def table(self, plan: StudyPlan) -> EventTable | None:
        """Return the table of a plan, if it is there."""
        with self._lock:
            return self._tables.get(plan.reconstruct_hash)

    def masks(self, table: EventTable) -> TableMasks:
        """Return the masks of a table; those of the last one are kept."""
        with self._lock:
            if self._masks is None or self._masks[0] is not table:
                self._masks = (table, TableMasks(table))
            return self._masks[1]

    def result(
        self, plan: StudyPlan, report: Report, *, quick: bool
    ) -> tuple[StudyResult, bool]:
        """Find or make the result of a plan.

        Parameters
        ----------
        plan : StudyPlan
            The plan.
        report : callable
            Told of the progress; whatever it raises ends the work.
        quick : bool
            Move the last sums over the rows between two cuts, if that is all.

        Returns
        -------
        tuple
            The result, and whether it comes from full sums.
        """
        with self._lock:
            known = self._results.get(plan.hash)
        table = self.table(plan)
        if table is None:
            table = self._source.table(plan, report)
            with self._lock:
                _keep(self._tables, plan.reconstruct_hash, table, TABLES_KEPT)
        if known is not None:
            return known, True
        moved = None
        if quick and self._sums is not None:
            old, sums = self._sums
            if old.reconstruct_hash == plan.reconstruct_hash:
                moved = moved_sums(sums, table, old, plan)
        full = moved is None
        sums = summarise(table, plan) if moved is None else moved
        self._sums = (plan, sums)
        origin, inputs = self._source.origin
        result = finish(sums, plan, report=origin, inputs=inputs)
        if full:
            with self._lock:
                _keep(self._results, plan.hash, result, RESULTS_KEPT)
        return result, full


def _keep(cache: OrderedDict[str, Any], key: str, value: Any, most: int) -> None:
    """Put into a cache that forgets what was not used for longest."""
    cache[key] = value
    cache.move_to_end(key)
    while len(cache) > most:
        cache.popitem(last=False)
