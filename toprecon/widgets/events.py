"""Events: what was read, what is selected, and the settings of the selection."""

from __future__ import annotations

import html
import math
from typing import Any

import ipywidgets

from toprecon import figures
from toprecon.widgets.base import Panel
from toprecon.widgets.controls import OptionControls
from toprecon.widgets.parts import Picture, helping, labelled


class EventsPanel(Panel):
    """Samples, cut flow, report of the reading and settings of the selection."""

    title = "Events"

    def build(self) -> list[Any]:
        """Make the widgets, top to bottom."""
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
            self.picture.widget,
            labelled("Samples"),
            self.samples,
            self.report,
            labelled("Settings of the selection"),
            *note,
            self.settings.widget,
        ]

    def paint(self) -> None:
        """Show the cut flow, the samples and what was rejected."""
        result, caption = self.shared.result, self.shared.caption
        self.settings.follow(self.live.plan.selection)
        self.picture.draw(
            f"flow of {len(result.cut_flow.steps)}",
            lambda figure: figures.cut_flow_figure(
                result.cut_flow, caption=caption, figure=figure
            ),
        )
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
        return (
            "from toprecon.figures import cut_flow_figure\n\n"
            f"cut_flow_figure({self.shared.beams_code}.cut_flow)\n"
            "print(result.report)"
        )


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
