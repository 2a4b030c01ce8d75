"""The live study: plan in, cached results out, one notification of a change.

No widget is known here. Whoever edits the plan only marks it as wanted; one worker
thread takes the newest plan, reconstructs if it must, and sums. Everything that
changes state holds one re-entrant lock, because callbacks of a notebook may run in a
second thread beside a running cell. The synchronous mode does the same work in the
calling thread, for tests and notebooks that run without anybody watching.
"""

from __future__ import annotations

import threading
from collections import OrderedDict
from collections.abc import Callable
from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError, StudyError, TopreconError
from toprecon.events import Binning, EventTable, PairingClass
from toprecon.io import EventSource, open_events
from toprecon.study.cutting import apply_cuts, is_reconstructed, passes_cut
from toprecon.study.plan import StudyPlan
from toprecon.study.reconstruction import reconstruct
from toprecon.study.result import StudyResult, finish
from toprecon.study.sums import check_plan, summarise

TABLES_KEPT = 3
RESULTS_KEPT = 64
CHUNK = 20_000
"""Events per chunk: small, so that progress shows and a stop is quick."""

Listener = Callable[["LiveStudy"], Any]


class _Superseded(Exception):  # noqa: N818 (a signal between two lines, no error)
    """A newer plan is wanted, or the work is to stop."""


class LiveStudy:
    """A study that follows its plan.

    Parameters
    ----------
    source : EventTable, EventSource, events, path or list of paths
        What is studied. With a table the reconstruct part of the plan is fixed.
    plan : StudyPlan, optional
        The default plan if absent.
    synchronous : bool
        Work in the calling thread; every change returns when its result is there.
    layout, catalogue : optional
        How to read files, see :func:`toprecon.open_events`.
    """

    def __init__(
        self,
        source: Any,
        plan: StudyPlan | None = None,
        *,
        synchronous: bool = False,
        layout: Any = None,
        catalogue: Any = None,
    ) -> None:
        if isinstance(source, str) or (
            not isinstance(source, (EventTable, EventSource, ak.Array))
        ):
            source = open_events(source, layout=layout, catalogue=catalogue)
        self.lock = threading.RLock()
        self.synchronous = synchronous
        self._source = source
        self._plan = plan or StudyPlan()
        self._tables: OrderedDict[str, EventTable] = OrderedDict()
        self._results: OrderedDict[str, StudyResult] = OrderedDict()
        if isinstance(source, EventTable):
            check_plan(source, self._plan)
            self._tables[self._plan.reconstruct_hash] = source
        self._listeners: list[Listener] = []
        self._changed = threading.Condition(self.lock)
        self._wanted = True
        self._working = False
        self._closed = False
        self._shown: StudyPlan | None = None
        self._error: TopreconError | None = None
        self._progress = (0, 0)
        self._worker: threading.Thread | None = None
        if synchronous:
            self._work_once()
        else:
            self._worker = threading.Thread(
                target=self._work, name="toprecon-live", daemon=True
            )
            self._worker.start()

    @property
    def plan(self) -> StudyPlan:
        """The newest plan; results may still be those of an older one."""
        return self._plan

    @property
    def error(self) -> TopreconError | None:
        """Why there is no result for the newest plan, if so."""
        return self._error

    @property
    def progress(self) -> tuple[int, int]:
        """Events reconstructed, and in all; equal when nothing is running."""
        return self._progress

    @property
    def is_busy(self) -> bool:
        """Whether a newer result is on its way."""
        with self.lock:
            return self._wanted or self._working

    @property
    def shown_plan(self) -> StudyPlan | None:
        """Plan of :attr:`result`."""
        return self._shown

    @property
    def table(self) -> EventTable:
        """Event table of the result shown."""
        with self.lock:
            plan = self._shown or self._plan
            if plan.reconstruct_hash not in self._tables:
                raise self._error or StudyError("live study: no table is there yet")
            return self._tables[plan.reconstruct_hash]

    @property
    def result(self) -> StudyResult:
        """Result of the newest plan that was worked out."""
        with self.lock:
            if self._shown is None or self._shown.hash not in self._results:
                raise self._error or StudyError("live study: no result is there yet")
            return self._results[self._shown.hash]

    def on_change(self, listener: Listener) -> Callable[[], None]:
        """Call a function after every new result or error.

        Parameters
        ----------
        listener : callable
            Called with the live study, under its lock, from the worker thread.

        Returns
        -------
        callable
            Call it to stop the notifications.
        """
        with self.lock:
            self._listeners.append(listener)

        def remove() -> None:
            with self.lock:
                if listener in self._listeners:
                    self._listeners.remove(listener)

        return remove

    def configure(self, **sections: Any) -> None:
        """Replace sections of the plan, such as ``pairing=PairingOptions(...)``.

        Parameters
        ----------
        **sections
            By the names of :class:`StudyPlan`.
        """
        with self.lock:
            self.set_plan(self._plan.replace(**sections))

    def set_settings(self, settings: dict[str, Any]) -> None:
        """Replace single settings by path, such as ``{"pairing.cap": 6}``."""
        with self.lock:
            self.set_plan(self._plan.with_settings(settings))

    def set_cut(
        self,
        observable: str,
        low: float | None = None,
        high: float | None = None,
        *,
        on: bool = True,
    ) -> None:
        """Set or replace the cut on one observable."""
        with self.lock:
            self.set_plan(self._plan.with_cut(observable, low, high, on=on))

    def set_plan(self, plan: StudyPlan) -> None:
        """Want the results of another plan.

        Parameters
        ----------
        plan : StudyPlan
            Takes the place of the present one at once; results follow.
        """
        with self._changed:
            if plan == self._plan and self._error is None:
                return
            self._plan = plan
            self._wanted = True
            self._changed.notify_all()
        if self.synchronous:
            self._work_once()

    def wait(self, timeout: float | None = 60.0) -> StudyResult:
        """Wait until nothing newer is on its way.

        Parameters
        ----------
        timeout : float, optional
            Longest time [s].

        Returns
        -------
        StudyResult
            Of the newest plan.

        Raises
        ------
        StudyError
            If it takes longer.
        """
        with self._changed:
            done = self._changed.wait_for(
                lambda: not (self._wanted or self._working) or self._closed, timeout
            )
            if not done:
                msg = f"live study: no result within {timeout} s"
                raise StudyError(msg)
            if self._error is not None:
                raise self._error
            return self.result

    def close(self) -> None:
        """Stop the worker and forget the listeners."""
        with self._changed:
            self._closed = True
            self._listeners.clear()
            self._changed.notify_all()
        if self._worker is not None and self._worker is not threading.current_thread():
            self._worker.join(timeout=10)

    def distribution(
        self, observable: str, binning: Binning
    ) -> dict[str, NDArray[np.float64]]:
        """Return the histogram behind a cut: all other cuts applied, by class.

        Parameters
        ----------
        observable : str
            A column of the table.
        binning : Binning
            Bins.

        Returns
        -------
        dict of array, shape (B,)
            Sums of the weights used in the result, by pairing class (lower case),
            ``outside`` and ``background``.
        """
        with self.lock:
            table, plan, result = self.table, self._shown or self._plan, self.result
        keep = (table["stage"] == 0) & is_reconstructed(table)
        for cut in plan.active_cuts:
            if cut.observable != observable:
                keep &= passes_cut(table, cut)
        factors = result.beams.factors.factors
        scale = np.array([factors[s.name] for s in table.samples])
        weight = table["weight"] * scale[table["sample"]]
        index = binning.digitise(table[observable])
        keep &= index >= 0
        groups = {
            item.name.lower(): table["is_signal"] & (table["pairing_class"] == item)
            for item in PairingClass
        }
        process = table.is_signal_process
        groups["outside"] = process & ~table["is_signal"]
        groups["background"] = ~process
        return {
            name: np.bincount(
                index[keep & mask], weight[keep & mask], minlength=len(binning)
            ).astype(np.float64)
            for name, mask in groups.items()
            if (keep & mask).any()
        }

    def selected(self) -> NDArray[np.bool_]:
        """Return which rows of the table pass everything, shape (E,)."""
        with self.lock:
            return apply_cuts(self.table, self._shown or self._plan).selected

    def code(self) -> str:
        """Return the lines of Python that give the present result."""
        return (
            "from toprecon import StudyPlan, run_study\n\n"
            f"plan = {self._plan.as_code()}\n"
            "result = run_study(source, plan)"
        )

    def _work(self) -> None:
        """Take the newest plan whenever one is wanted."""
        while True:
            with self._changed:
                self._changed.wait_for(lambda: self._wanted or self._closed)
                if self._closed:
                    return
            self._work_once()

    def _work_once(self) -> None:
        """Work the newest plan out and tell the listeners."""
        with self._changed:
            plan = self._plan
            self._wanted, self._working = False, True
        error: TopreconError | None = None
        try:
            result = self._result_of(plan)
        except _Superseded:
            result = None
        except TopreconError as caught:
            result, error = None, caught
        with self._changed:
            try:
                if result is not None:
                    self._keep(self._results, plan.hash, result, RESULTS_KEPT)
                    self._shown, self._error = plan, None
                elif error is not None:
                    self._error = error
                if result is not None or error is not None:
                    for listener in list(self._listeners):
                        listener(self)
            finally:
                self._working = False
                self._changed.notify_all()

    def _result_of(self, plan: StudyPlan) -> StudyResult:
        """Find or make the result of a plan."""
        with self.lock:
            known = self._results.get(plan.hash)
            table = self._tables.get(plan.reconstruct_hash)
        if known is not None:
            return known
        if table is None:
            table = self._reconstruct(plan)
            with self.lock:
                self._keep(self._tables, plan.reconstruct_hash, table, TABLES_KEPT)
        report, inputs = None, {}
        if isinstance(self._source, EventSource):
            report, inputs = self._source.report, self._source.fingerprints
        return finish(summarise(table, plan), plan, report=report, inputs=inputs)

    def _reconstruct(self, plan: StudyPlan) -> EventTable:
        """Make the table, chunk by chunk, unless something newer is wanted."""
        source = self._source
        if isinstance(source, EventTable):
            check_plan(source, plan)
            return source
        if isinstance(source, ak.Array):
            n = len(source)
            chunks: Any = (source[i : i + CHUNK] for i in range(0, n, CHUNK))
        else:
            n, chunks = source.entries, source.chunks(CHUNK)
        self._progress = (0, n)
        tables = []
        for events in chunks:
            self._check_still_wanted(plan)
            tables.append(reconstruct(events, plan))
            self._progress = (self._progress[0] + len(events), n)
        if not tables:
            msg = "study: at least one event is required; the files hold none"
            raise InputError(msg)
        self._progress = (n, n)
        if isinstance(source, ak.Array):
            return _joined(tables)
        return EventTable.concatenate(tables)

    def _check_still_wanted(self, plan: StudyPlan) -> None:
        """Give up if the plan was replaced by one that needs another table."""
        with self.lock:
            newer = self._plan.reconstruct_hash != plan.reconstruct_hash
            if self._closed or (self._wanted and newer):
                raise _Superseded

    def _keep(
        self, cache: OrderedDict[str, Any], key: str, value: Any, most: int
    ) -> None:
        """Put into a cache that forgets what was not used for longest."""
        cache[key] = value
        cache.move_to_end(key)
        while len(cache) > most:
            cache.popitem(last=False)


def _joined(tables: list[EventTable]) -> EventTable:
    """Join tables of slices of one array, whose samples describe the whole of it."""
    first = tables[0]
    columns = {n: np.concatenate([t[n] for t in tables]) for n in first.columns}
    return EventTable(columns, first.samples, first.stages, first.provenance)
