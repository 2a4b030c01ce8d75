"""The live study: plan in, cached results out, one notification of a change.

No widget is known here. Whoever edits the plan only marks it as wanted and returns at
once; one worker thread takes the newest plan, reconstructs if it must, sums, and calls
the listeners, who draw. All of that holds one re-entrant lock, because callbacks of a
notebook may run in a second thread beside a running cell. A moved cut is answered
first from the rows that it moves over; once nothing was wanted for 0.3 s the study
*settles*: the sums are made in full, and listeners may draw what is slow. The
synchronous mode does the same work in the calling thread and settles at once, for
tests and notebooks that run without anybody watching.
"""

from __future__ import annotations

import functools
import threading
from collections import deque
from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import StudyError
from toprecon.events import Binning, EventTable
from toprecon.figures import EventView
from toprecon.study.live_editing import PlanEditing
from toprecon.study.live_results import LiveResults
from toprecon.study.live_source import LiveSource
from toprecon.study.live_tasks import GivenUp, Progress, Task, Work
from toprecon.study.one_event import view_event
from toprecon.study.plan import StudyPlan
from toprecon.study.result import StudyResult

PAUSE = 0.3
"""Seconds without a change after which the study settles."""

Listener = Callable[["LiveStudy"], Any]


class LiveStudy(PlanEditing):
    """A study that follows its plan.

    Parameters
    ----------
    source : EventTable, EventSource, events, path or list of paths
        What is studied. With a table, or the path of a saved one, the reconstruct
        part of the plan is fixed.
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
        self.lock = threading.RLock()
        self.synchronous = synchronous
        self._source = LiveSource(source, layout, catalogue)
        self._plan = plan or StudyPlan()
        self._kept = LiveResults(self._source, self._plan, self.lock)
        self._listeners: list[Listener] = []
        self._changed = threading.Condition()  # guards the wishes, never held long
        self._wanted = True
        self._working = False
        self._stopped = False
        self._closed = False
        self._shown: tuple[StudyPlan, StudyResult] | None = None
        self._settled = False
        self._error: Exception | None = None
        self._progress = Progress(0, 0)
        self._tasks: deque[Task] = deque()
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
    def source(self) -> Any:
        """The event table, source or events studied."""
        return self._source.source

    @property
    def can_reconstruct(self) -> bool:
        """Whether there are events, so that the reconstruct part can be edited."""
        return self._source.can_reconstruct

    @property
    def error(self) -> Exception | None:
        """Why there is no result for the newest plan, if so."""
        return self._error

    @property
    def progress(self) -> Progress:
        """How far the work in hand is."""
        return self._progress

    @property
    def is_busy(self) -> bool:
        """Whether a newer result is on its way."""
        with self._changed:
            return self._wanted or self._working or bool(self._tasks)

    @property
    def is_settled(self) -> bool:
        """Whether the result shown is the full one of the newest plan."""
        return self._settled

    @property
    def shown_plan(self) -> StudyPlan | None:
        """Plan of :attr:`result`."""
        return self._shown[0] if self._shown else None

    @property
    def table(self) -> EventTable:
        """Event table of the result shown."""
        with self.lock:
            plan = self.shown_plan or self._plan
            table = self._kept.table(plan)
            if table is None:
                raise self._error or StudyError("live study: no table is there yet")
            return table

    @property
    def result(self) -> StudyResult:
        """Result of the newest plan that was worked out."""
        with self.lock:
            if self._shown is None:
                raise self._error or StudyError("live study: no result is there yet")
            return self._shown[1]

    def on_change(self, listener: Listener) -> Callable[[], None]:
        """Call a function after every new result, error or step of the progress.

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

    def stop(self) -> None:
        """Stop reconstructing; the next change, or :meth:`resume`, goes on."""
        with self._changed:
            self._stopped = True
            self._changed.notify_all()

    def resume(self) -> None:
        """Work the newest plan out again, after a stop or an error."""
        self._want()
        if self.synchronous:
            self._work_once()

    def run(
        self,
        doing: str,
        work: Work,
        then: Callable[[Any], Any],
        *,
        failed: Callable[[Exception], Any],
        unit: str = "chunks",
    ) -> None:
        """Do long work in the worker thread, with progress and a way to stop.

        Parameters
        ----------
        doing : str
            What is done, such as ``"calibrating"``.
        work : callable
            Called with a function that takes (done, total) and raises when the work
            is to stop; must not touch the study.
        then : callable
            Called with what ``work`` returns, under the lock.
        failed : callable
            Called with the error instead, under the lock.
        unit : str
            What is counted.
        """
        with self._changed:
            self._tasks.append(Task(doing, unit, work, then, failed))
            self._stopped = False
            self._changed.notify_all()
        if self.synchronous:
            self._run_task()

    def wait(self, timeout: float | None = 60.0) -> StudyResult:
        """Wait until nothing newer is on its way and the study has settled.

        Parameters
        ----------
        timeout : float, optional
            Longest time [s].

        Returns
        -------
        StudyResult
            Of the newest plan, from full sums.

        Raises
        ------
        StudyError
            If it takes longer.
        Exception
            Whatever keeps the newest plan from having a result.
        """
        if threading.current_thread() is self._worker:
            msg = "live study: a listener must not wait; take .result instead"
            raise StudyError(msg)

        def is_done() -> bool:
            busy = self._wanted or self._working or self._tasks
            return self._closed or not (busy or not (self._settled or self._error))

        with self._changed:
            if not self._changed.wait_for(is_done, timeout):
                msg = f"live study: no result within {timeout} s"
                raise StudyError(msg)
        if self._error is not None:
            raise self._error
        return self.result

    def close(self) -> None:
        """Stop the worker and forget the listeners."""
        with self._changed:
            self._closed = True
            self._changed.notify_all()
        if self._worker is not None and self._worker is not threading.current_thread():
            self._worker.join(timeout=10)
        self._listeners.clear()

    def distribution(
        self, observable: str, binning: Binning, *, beams: str = "plan"
    ) -> dict[str, NDArray[np.float64]]:
        """Return the histogram behind a cut: all other cuts applied, by class.

        Parameters
        ----------
        observable : str
            A column of the table.
        binning : Binning
            Bins.
        beams : str
            ``"plan"``, ``"LR"`` or ``"RL"``.

        Returns
        -------
        dict of array, shape (B,)
            Sums of the weights used in the result, by pairing class (lower case),
            ``outside`` and ``background``.
        """
        with self.lock:
            table, plan, result = self.table, self.shown_plan or self._plan, self.result
            factors = result.by_helicity.get(beams, result.beams).factors
            return self._kept.masks(table).distribution(
                plan, factors, observable, binning
            )

    def snapshot(self) -> tuple[EventTable, StudyPlan]:
        """Return the table and the plan of the result shown, to compare with later."""
        with self.lock:
            return self.table, self.shown_plan or self._plan

    def view_event(self, row: int) -> EventView:
        """Look at one event of the table shown.

        Parameters
        ----------
        row : int
            Row of the table.

        Returns
        -------
        EventView
            Ready for :func:`toprecon.figures.event_figure`.

        Raises
        ------
        StudyError
            If there is no such row, or the study has a table but no events.
        """
        with self.lock:
            table, plan = self.table, self.shown_plan or self._plan
        if not 0 <= row < len(table):
            msg = f"row: must be from 0 to {len(table) - 1}; got {row}"
            raise StudyError(msg)
        return view_event(self._source.event(row), plan)

    def selected(self) -> NDArray[np.bool_]:
        """Return which rows of the table pass everything, shape (E,)."""
        with self.lock:
            plan = self.shown_plan or self._plan
            return self._kept.masks(self.table).passing(plan)

    def code(self) -> str:
        """Return the lines of Python that give the present result."""
        made = (
            "# the calibration is saved beside the plan, or made by calibrate_plan\n"
            if self._plan.pairing.calibrations
            else ""
        )
        return (
            "from toprecon import StudyPlan, run_study\n\n"
            f"{made}plan = {self._plan.as_code()}\n"
            "result = run_study(source, plan)"
        )

    def _edit(self, change: Callable[[StudyPlan], StudyPlan]) -> None:
        """Replace the plan by a changed one and want its result."""
        with self._changed:
            plan = change(self._plan)
            if plan == self._plan and self._error is None and not self._stopped:
                return
            self._plan = plan
            self._want()
        if self.synchronous:
            self._work_once()

    def _want(self) -> None:
        with self._changed:
            self._wanted, self._settled, self._stopped = True, False, False
            self._changed.notify_all()

    def _work(self) -> None:
        """Take the newest plan whenever one is wanted; settle after a pause."""
        while True:
            with self._changed:
                unsettled = not (self._settled or self._error or self._stopped)
                self._changed.wait_for(
                    lambda: self._wanted or self._closed or bool(self._tasks),
                    PAUSE if unsettled else None,
                )
                if self._closed:
                    return
                on_plan = self._wanted or not self._tasks
            try:
                if on_plan:
                    self._work_once()
                else:
                    self._run_task()
            except Exception as caught:  # noqa: BLE001 (of a listener; wait raises it)
                self._error = caught

    def _work_once(self) -> None:
        """Work the newest plan out and tell the listeners.

        A new wish is worked out quickly if it can be, from the rows that a cut has
        moved over. Without a newer wish the study then settles on the full sums.
        """
        with self._changed:
            plan, quick = self._plan, self._wanted and not self.synchronous
            self._wanted, self._working = False, True
        error: Exception | None = None
        found: tuple[StudyResult, bool] | None = None
        try:
            report = functools.partial(self._report, plan)
            found = self._kept.result(plan, report, quick=quick)
        except GivenUp:
            if self._stopped:
                error = StudyError("stopped before the end; change a setting or resume")
        except Exception as caught:  # noqa: BLE001 (shown to whoever asks)
            error = caught
        try:
            with self.lock:
                with self._changed:
                    self._error = error
                    if found is not None:
                        self._shown = (plan, found[0])
                        # a wish that came meanwhile will be worked out next
                        self._settled = found[1] and not quick and not self._wanted
                if found is not None or error is not None:
                    self._tell()
        finally:
            with self._changed:
                self._working = False
                self._changed.notify_all()

    def _run_task(self) -> None:
        """Do the oldest of the tasks and tell whoever asked for it."""
        with self._changed:
            task = self._tasks.popleft()
            self._working = True

        def report(done: int, total: int) -> None:
            with self._changed:
                if self._closed or self._stopped:
                    raise GivenUp
            self._show(Progress(done, total, task.doing, task.unit))

        try:
            found: Any = None
            error: Exception | None = None
            try:
                report(0, 1)
                found = task.work(report)
            except GivenUp:
                error = StudyError(f"{task.doing}: stopped before the end")
                self._stopped = False  # the study itself goes on
            except Exception as caught:  # noqa: BLE001 (given to whoever asked)
                error = caught
            self._progress = Progress(0, 0)
            with self.lock:
                self._tell()
                if error is None:
                    task.then(found)
                else:
                    task.failed(error)
        finally:
            with self._changed:
                self._working = False
                self._changed.notify_all()

    def _show(self, progress: Progress) -> None:
        """Tell the listeners how far the work is."""
        self._progress = progress
        if not self.synchronous:
            with self.lock:
                self._tell()

    def _tell(self) -> None:
        """Call the listeners, under the lock."""
        for listener in list(self._listeners):
            listener(self)

    def _report(self, plan: StudyPlan, done: int, total: int) -> None:
        """Show the progress; give up if another table is wanted."""
        with self._changed:
            newer = self._plan.reconstruct_hash != plan.reconstruct_hash
            if self._closed or self._stopped or (self._wanted and newer):
                self._progress = Progress(0, 0)
                raise GivenUp
        self._show(Progress(done, total))
