"""Events: what was read, what is selected, and the settings of the selection."""

from __future__ import annotations

import html
import math
from typing import Any

import ipywidgets

from toprecon import figures
from toprecon.errors import StudyError
from toprecon.study import ANGLE, data_like, unmatched_from_tail
from toprecon.widgets.base import Panel
from toprecon.widgets.controls import OptionControls
from toprecon.widgets.observables import observable_in, offer
from toprecon.widgets.parts import Picture, helping, labelled, said

FLOW, DATA, TAIL = "cut flow", "as in data", "unmatched from the tail"


class EventsPanel(Panel):
    """Cut flow, the data-like view, samples and settings of the selection."""

    title = "Events"

    def build(self) -> list[Any]:
        """Make the widgets, top to bottom."""
        self.view = ipywidgets.ToggleButtons(
            options=[FLOW, DATA, TAIL], value=FLOW, style={"button_width": "15em"}
        )
        self.observable = ipywidgets.Dropdown(
            description="show",
            options=[(ANGLE.axis_label, ANGLE.name)],
            value=ANGLE.name,
            style={"description_width": "4em"},
            layout=ipywidgets.Layout(width="26em"),
        )
        for item in (self.view, self.observable):
            item.observe(lambda _: self.redraw(), names="value")
        self._has_tail = False
        self.text = ipywidgets.HTML()
        self.picture = Picture()
        self.samples = ipywidgets.HTML()
        self.report = ipywidgets.HTML()
        self.settings = OptionControls(self, self.live.plan.selection, "selection")
        note = []
        if not self.live.can_reconstruct:
            self.settings.disable()
            note = [
                helping("fixed: the study runs on a saved event table, without events")
            ]
        return [
            self.view,
            self.observable,
            self.picture.widget,
            self.text,
            labelled("Samples"),
            self.samples,
            self.report,
            labelled("Settings of the selection"),
            *note,
            self.settings.widget,
        ]

    def paint(self) -> None:
        """Show the view chosen, the samples and what was rejected."""
        result, caption = self.shared.result, self.shared.caption
        self.settings.follow(self.live.plan.selection)
        offer(self.observable, self.live, (ANGLE.axis_label, ANGLE.name))
        self.observable.layout.display = None if self.view.value == DATA else "none"
        if self.view.value == FLOW:
            self._say("")
            self.picture.draw(
                f"flow of {len(result.cut_flow.steps)}",
                lambda figure: figures.cut_flow_figure(
                    result.cut_flow, caption=caption, figure=figure
                ),
            )
        elif self.live.is_settled:
            with self.errors.guard():
                self._paint_data() if self.view.value == DATA else self._paint_tail()
        whole = self.live.result
        self.samples.value = _table(
            ("sample", "process", "beams", "√s [GeV]", "entries", "σ [fb]"),
            [
                (
                    sample.name,
                    sample.process,
                    sample.helicity.name,
                    f"{sample.sqrt_s:g}",
                    f"{sample.entries:,}",
                    _cross_section(sample),
                )
                for sample in whole.samples
            ],
        )
        report = "" if whole.report is None else html.escape(str(whole.report))
        undefined = "".join(
            f"<br>{html.escape(name)}: {n:,} events lost because it is undefined"
            for name, n in whole.undefined.items()
            if n
        )
        self.report.value = f'<pre class="toprecon-help">{report}{undefined}</pre>'

    def python(self) -> str:
        """Return Python that gives what is shown."""
        beams = f'beams="{self.shared.beams.value}"'
        table = "table = reconstruct_source(source, plan)\n"
        if self.view.value == DATA:
            return (
                "from toprecon.study import data_like, reconstruct_source\n\n"
                f'{table}print(data_like(table, plan, "{self.observable.value}", {beams}))'
            )
        if self.view.value == TAIL and not self._has_tail:
            return "# no templates of matched and unmatched events here"
        if self.view.value == TAIL:
            return (
                "from toprecon.study import reconstruct_source, unmatched_from_tail\n\n"
                f"{table}print(unmatched_from_tail(table, plan, {beams}))"
            )
        return (
            "from toprecon.figures import cut_flow_figure\n\n"
            f"cut_flow_figure({self.shared.beams_code}.cut_flow)\n"
            "print(result.report)"
        )

    def _paint_data(self) -> None:
        """Draw an observable as data would show it."""
        table, plan = self.live.snapshot()
        found = data_like(
            table, plan, self.observable.value, beams=self.shared.beams.value
        )
        low, high = (found.cut.low, found.cut.high) if found.cut else (None, None)
        self.picture.draw(
            DATA,
            lambda figure: figures.data_like_figure(
                found.observable,
                found.binning,
                found.stack,
                found.variances,
                outside=sum(found.outside.values()),
                is_expected=found.is_expected,
                low=low,
                high=high,
                caption=self.shared.caption,
                figure=figure,
            ),
        )
        self._say(str(found))

    def _paint_tail(self) -> None:
        """Draw the fit to the pairing score."""
        table, plan = self.live.snapshot()
        self._has_tail = False
        if "pairing.chi2" not in table:
            self._say("The tail is that of the pairing score: choose a branch with it.")
            self.picture.widget.value = b""
            return
        try:
            found = unmatched_from_tail(table, plan, beams=self.shared.beams.value)
        except StudyError as error:
            self._say(str(error))
            self.picture.widget.value = b""
            return
        self._has_tail = True
        self.picture.draw(
            TAIL,
            lambda figure: figures.tail_figure(
                observable_in(plan, "pairing.chi2"),
                found.binning,
                found.data,
                found.parts,
                errors=found.errors,
                place=found.place,
                is_expected=found.is_expected,
                caption=f"{self.shared.caption}\ntemplates: half A, fitted: half B",
                figure=figure,
            ),
        )
        self._say(str(found))

    def _say(self, text: str) -> None:
        self.text.value = said(text.replace("+-", "±"))


def _cross_section(sample: Any) -> str:
    """Return the cross sections that are known."""
    known = {
        "LR": sample.cross_section_lr,
        "RL": sample.cross_section_rl,
        "": sample.cross_section,
    }
    parts = [
        f"{value:.4g} {name}".strip()
        for name, value in known.items()
        if not math.isnan(value)
    ]
    return ", ".join(parts) or "not stated"


def _table(head: tuple[str, ...], rows: list[tuple[str, ...]]) -> str:
    """Return a table in HTML."""
    top = "".join(f"<th>{html.escape(cell)}</th>" for cell in head)
    body = "".join(
        "<tr>" + "".join(f"<td>{html.escape(cell)}</td>" for cell in row) + "</tr>"
        for row in rows
    )
    return f'<table class="toprecon-table"><tr>{top}</tr>{body}</table>'
