"""What every part of the desk shares: one study, one status line, and an end."""

from __future__ import annotations

import html
from collections.abc import Callable
from typing import Any, ClassVar

import ipywidgets

from toprecon.study import BEAMS as PURE
from toprecon.study import BeamsResult, LiveStudy, StudyPlan, sentence_of
from toprecon.study.live_tasks import Work
from toprecon.widgets.parts import STYLE, ErrorLine, close_all

BEAMS = {"plan": "of the plan", **PURE}
"""Settings of the beams that results are there for, as people read them."""


class Shared:
    """One study with its errors, beams and status line, shared by panels.

    Parameters
    ----------
    source : LiveStudy or whatever a LiveStudy can be made of
        A live study given is left running when the panels close.
    plan : StudyPlan, optional
        The default plan if absent.
    synchronous : bool
        Work in the calling thread.
    layout, catalogue : optional
        How to read files.
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
        self._owns = not isinstance(source, LiveStudy)
        self.live: LiveStudy = (
            LiveStudy(
                source,
                plan,
                synchronous=synchronous,
                layout=layout,
                catalogue=catalogue,
            )
            if self._owns
            else source
        )
        if not self._owns and plan is not None:
            self.live.set_plan(plan)
        self.errors = ErrorLine(self.live)
        self.status = ipywidgets.HTML(layout=ipywidgets.Layout(width="auto"))
        self._said = ""
        self.beams = ipywidgets.Dropdown(
            description="beams",
            options=[(BEAMS["plan"], "plan")],
            value="plan",
            style={"description_width": "3.5em"},
            layout=ipywidgets.Layout(width="14em", flex="0 0 auto"),
        )
        self.bar = ipywidgets.IntProgress(layout=ipywidgets.Layout(width="22em"))
        self.stop = ipywidgets.Button(
            description="stop", tooltip="stop the work in hand; any change goes on"
        )
        self.stop.on_click(lambda _: self.live.stop())
        self.progress = ipywidgets.HBox(
            [self.bar, self.stop], layout=ipywidgets.Layout(display="none")
        )
        self._panels: list[Panel] = []
        self.beams.observe(lambda _: self.refresh(), names="value")
        self._leave = self.live.on_change(lambda _: self.refresh())
        self.say("working ...")

    @property
    def header(self) -> list[Any]:
        """Widgets that belong above the panels."""
        return [
            ipywidgets.HTML(STYLE),
            ipywidgets.HBox([self.beams, self.status]),
            self.progress,
            self.errors.widget,
        ]

    @property
    def result(self) -> BeamsResult:
        """The newest result for the beams chosen."""
        result = self.live.result
        return result.by_helicity.get(self.beams.value, result.beams)

    @property
    def caption(self) -> str:
        """Small print of every figure: what its numbers rest on."""
        result = self.live.result
        names = [sample.name for sample in result.samples]
        shown = ", ".join(names[:3]) + (
            f" and {len(names) - 3} more" if names[3:] else ""
        )
        beams = self.beams.value
        polarised = "" if beams == "plan" else f" · beams {BEAMS[beams]}"
        return f"simulated events: {shown}{polarised} · statistical errors only"

    @property
    def beams_code(self) -> str:
        """Python that picks the beams chosen from ``result``."""
        name = self.beams.value
        return "result.beams" if name == "plan" else f'result.by_helicity["{name}"]'

    def join(self, panel: Panel) -> None:
        """Let a panel follow the study."""
        self._panels.append(panel)

    def refresh(self) -> None:
        """Show the newest result, or why there is none, in every panel on view."""
        with self.live.lock, self.errors.guard():
            self._show_progress()
            if self.live.error is not None:
                self.errors.show_error(self.live.error)
                self.errors.forget_with_any_result()
                self.say("no result for these settings")
                return
            if self.live.shown_plan is None:
                self.say("working ...")
                return
            self._offer_beams()
            for panel in self._panels:
                if panel.on_view:
                    panel.draw()
            self.errors.outlived(self.live.shown_plan)
            self.say(sentence_of(self.result))

    def say(self, text: str) -> None:
        """Put a sentence where screen readers announce it."""
        if text != self._said:
            self._said = text
            self.status.value = (
                '<p class="toprecon-status" role="status" aria-live="polite">'
                f"{html.escape(text)}</p>"
            )

    def close(self) -> None:
        """Leave the study; stop it if it was made here."""
        self._leave()
        if self._owns:
            self.live.close()
        for widget in (self.errors.widget, self.status, self.beams, self.progress):
            close_all(widget)

    def _show_progress(self) -> None:
        """Show the bar while long work is done."""
        progress = self.live.progress
        running = self.live.is_busy and progress.is_running
        if running:
            self.bar.max, self.bar.value = progress.total, progress.done
            self.say(str(progress))
        display = None if running else "none"
        if self.progress.layout.display != display:
            self.progress.layout.display = display

    def _offer_beams(self) -> None:
        """Offer the beams that the samples have."""
        names = ["plan", *self.live.result.by_helicity]
        choices = [(BEAMS[name], name) for name in names]
        if list(self.beams.options) != choices:
            value = self.beams.value if self.beams.value in names else "plan"
            self.beams.options = choices
            self.beams.value = value


class Panel:
    """One part of the desk; works alone as well.

    Parameters
    ----------
    source : Shared, LiveStudy, or whatever a LiveStudy can be made of
        The study shown and edited.
    plan : StudyPlan, optional
        The default plan if absent.
    synchronous : bool
        Work in the calling thread.
    layout, catalogue : optional
        How to read files.
    """

    title: ClassVar[str] = ""

    def __init__(
        self,
        source: Any,
        plan: StudyPlan | None = None,
        *,
        synchronous: bool = False,
        layout: Any = None,
        catalogue: Any = None,
    ) -> None:
        self._alone = not isinstance(source, Shared)
        self.shared = (
            Shared(
                source,
                plan,
                synchronous=synchronous,
                layout=layout,
                catalogue=catalogue,
            )
            if self._alone
            else source
        )
        self.on_view = self._alone
        self._code = ipywidgets.HTML()
        inside = [*self.build(), self._code]
        self.widget = ipywidgets.VBox(
            [*self.shared.header, *inside] if self._alone else inside
        )
        self.widget.add_class("toprecon")
        self.shared.join(self)
        if self._alone:
            self.shared.refresh()

    @property
    def live(self) -> LiveStudy:
        """The study beneath."""
        return self.shared.live

    @property
    def errors(self) -> ErrorLine:
        """The line of errors."""
        return self.shared.errors

    def build(self) -> list[Any]:
        """Make the widgets, top to bottom."""
        raise NotImplementedError

    def paint(self) -> None:
        """Show the newest result; called under the lock, with a result there."""
        raise NotImplementedError

    def python(self) -> str:
        """Return Python, following ``result = ...``, that gives what is shown."""
        raise NotImplementedError

    def draw(self) -> None:
        """Show the newest result and the code that gives it."""
        self.paint()
        if self.live.is_settled:
            code = html.escape(f"{self.live.code()}\n{self.python()}")
            self._code.value = (
                f"<details><summary>the same in Python</summary><pre>{code}</pre>"
                "</details>"
            )

    def redraw(self) -> None:
        """Draw again after a control of this panel changed."""
        with self.live.lock, self.errors.guard():
            if self.on_view and self.live.shown_plan is not None:
                self.draw()

    def run_for(
        self,
        button: Any,
        doing: str,
        work: Work,
        then: Callable[[Any], Any],
        *,
        unit: str = "chunks",
    ) -> None:
        """Do long work for a button, which is off meanwhile.

        Parameters
        ----------
        button : Button
            What was pressed.
        doing, work, then, unit
            See :meth:`LiveStudy.run`; an error is shown in the line of errors.
        """
        button.disabled = True

        def finished(found: Any) -> None:
            button.disabled = False
            then(found)

        def failed(error: Exception) -> None:
            button.disabled = False
            self.errors.show_error(error)

        with self.errors.guard():
            self.live.run(doing, work, finished, failed=failed, unit=unit)

    def close(self) -> None:
        """Free every widget, and stop the study if it was made here."""
        if self._alone:
            self.shared.close()
        close_all(self.widget)

    def _ipython_display_(self) -> None:
        show_in_cell(self)


_SHOWN: dict[str, tuple[str, list[Any]]] = {}
"""By cell of a notebook: the execution, and what it has shown."""


def show_in_cell(shown: Any) -> None:
    """Display a desk or a panel; close those an earlier run of the cell has left.

    Parameters
    ----------
    shown : Desk or Panel
        Has ``widget`` and ``close``.
    """
    from IPython.display import display

    cell, execution = _present_cell()
    if cell:
        earlier, others = _SHOWN.get(cell, ("", []))
        if earlier != execution:
            for other in others:
                if other is not shown:
                    other.close()
            others = []
        _SHOWN[cell] = (execution, [*others, shown])
    display(shown.widget)


def _present_cell() -> tuple[str, str]:
    """Return the identities of the cell and of its execution; empty outside."""
    from IPython import get_ipython

    shell = get_ipython()
    if shell is None or not hasattr(shell, "get_parent"):
        return "", ""
    parent = shell.get_parent() or {}
    cell = parent.get("metadata", {}).get("cellId", "")
    return str(cell), str(parent.get("header", {}).get("msg_id", ""))
