"""Calibration of the pairing: a button, and what the calibration brings."""

from __future__ import annotations

import html
from typing import Any

import ipywidgets

from toprecon.study import CalibratedPlan, calibrate_plan
from toprecon.widgets.base import Panel
from toprecon.widgets.parts import helping

SCORES = {
    "ratio right / wrong": "ratio",
    "chi-square with covariance": "correlated",
    "plain chi-square, fitted targets": "plain",
}
TAGS = {"weigh every jet": "likelihood", "two highest are b": "mask"}


class CalibrationControls:
    """Fit the densities of right and wrong assignments to half A of the events."""

    def __init__(self, panel: Panel) -> None:
        self._panel = panel
        wide = {"style": {"description_width": "5em"}}
        self.score = ipywidgets.Dropdown(
            description="score",
            options=SCORES,
            value="ratio",
            tooltip="what an assignment is judged by",
            layout=ipywidgets.Layout(width="23em"),
            **wide,
        )
        self.tags = ipywidgets.Dropdown(
            description="b scores",
            options=TAGS,
            value="likelihood",
            tooltip="what the b scores do",
            layout=ipywidgets.Layout(width="18em"),
            **wide,
        )
        self.button = ipywidgets.Button(
            description="calibrate",
            tooltip="half A of the selected, matched events; half B says what it brings",
        )
        self.button.on_click(lambda _: self.start())
        self.quality = ipywidgets.HTML()
        self.widget = ipywidgets.VBox(
            [
                helping(
                    "densities of right and wrong assignments from half A of the "
                    "matched events; the table is from half B"
                ),
                ipywidgets.HBox([self.score, self.tags, self.button]),
                self.quality,
            ]
        )

    def disable(self) -> None:
        """Show the controls without letting anybody use them."""
        for item in (self.score, self.tags, self.button):
            item.disabled = True

    def start(self) -> None:
        """Calibrate in the worker; the plan follows."""
        live = self._panel.live
        plan, score, tags = live.plan, self.score.value, self.tags.value
        self._panel.run_for(
            self.button,
            "calibrating",
            lambda report: calibrate_plan(
                live.source, plan, score=score, tags=tags, progress=report
            ),
            self._finished,
        )

    def _finished(self, found: CalibratedPlan) -> None:
        rows = "".join(
            f"<tr><td>{html.escape(q.sample)}</td><td>{q.sqrt_s:g}</td>"
            f"<td>{q.events:,}</td><td>{_percent(q.before)}</td>"
            f"<td>{_percent(q.after)}</td></tr>"
            for q in found.quality
        )
        self.quality.value = (
            '<table class="toprecon-table"><tr><th>sample</th><th>√s [GeV]</th>'
            "<th>events</th><th>right before [%]</th><th>right after [%]</th></tr>"
            f'{rows}</table><div class="toprecon-help">of the selected, matched events '
            "of half B</div>"
        )
        self._panel.live.configure(pairing=found.plan.pairing)


def _percent(value: Any) -> str:
    """Return a fraction and its error in per cent."""
    return f"{100 * value.value:.1f} ± {100 * value.error:.1f}"
