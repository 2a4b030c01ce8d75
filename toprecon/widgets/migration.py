"""Migration: where the events of every generated bin are reconstructed."""

from __future__ import annotations

import warnings
from typing import Any

import ipywidgets
import numpy as np

from toprecon import figures
from toprecon.errors import NotClosingWarning
from toprecon.study import UnfoldingOptions, closure_of
from toprecon.widgets.base import Panel
from toprecon.widgets.parts import Picture, helping

MATRIX, CLOSURE = "matrix", "closure test"
METHODS = ("inversion", "tikhonov", "bayes")


class MigrationPanel(Panel):
    """The migration matrix with purity, stability and efficiency, and its closure."""

    title = "Migration"

    def build(self) -> list[Any]:
        """Make the widgets, top to bottom."""
        edges = self.live.plan.migration.edges
        self._quiet = False
        self.view = ipywidgets.ToggleButtons(
            options=[MATRIX, CLOSURE], value=MATRIX, style={"button_width": "12.5em"}
        )
        self.bins = ipywidgets.BoundedIntText(
            value=len(edges) - 1,
            min=2,
            max=40,
            description="bins of cos θ",
            tooltip="equal bins from -1 to 1, generated and reconstructed",
            style={"description_width": "7em"},
            layout=ipywidgets.Layout(width="13em"),
        )
        self.bins.observe(lambda event: self._rebin(event["new"]), names="value")
        self.method = ipywidgets.Dropdown(
            description="corrected by",
            options=METHODS,
            tooltip="half B is corrected with the response of half A",
            style={"description_width": "7em"},
            layout=ipywidgets.Layout(width="18em"),
        )
        for item in (self.view, self.method):
            item.observe(lambda _: self.redraw(), names="value")
        self.picture = Picture()
        self.numbers = ipywidgets.HTML()
        return [
            self.view,
            ipywidgets.HBox([self.bins, self.method]),
            helping("equal bins; other edges can be set in the plan"),
            self.picture.widget,
            self.numbers,
        ]

    def paint(self) -> None:
        """Draw the view chosen."""
        n = len(self.live.plan.migration.edges) - 1
        if n != self.bins.value:  # changed elsewhere, perhaps to unequal bins
            self._quiet = True
            self.bins.value = n
            self._quiet = False
        self.method.layout.display = None if self.view.value == CLOSURE else "none"
        if self.view.value == MATRIX:
            self._paint_matrix()
        elif self.live.is_settled:
            self._paint_closure()

    def python(self) -> str:
        """Return Python that gives what is shown."""
        beams = self.shared.beams_code
        if self.view.value == MATRIX:
            return (
                "from toprecon.figures import matrix_figure\n\n"
                f"matrix_figure({beams}.migration)"
            )
        return (
            "from toprecon.study import LiveStudy, UnfoldingOptions, closure_of\n\n"
            "table = LiveStudy(source, plan, synchronous=True).table\n"
            f'method = UnfoldingOptions(method="{self.method.value}")\n'
            f'print(closure_of(table, plan, method, beams="{self.shared.beams.value}"))'
        )

    def _paint_matrix(self) -> None:
        """Draw the matrix and say how hard it is to undo."""
        matrix, caption = self.shared.result.migration, self.shared.caption
        self.picture.draw(
            MATRIX,
            lambda figure: figures.matrix_figure(
                matrix, caption=caption, figure=figure
            ),
        )
        parts = [f"{matrix.counts.sum():,.0f} in the matrix"]
        for name, values in (
            ("missed", matrix.missed),
            ("from outside the phase space", matrix.from_outside),
            ("background", matrix.background),
        ):
            parts.append(f"{values.sum():,.0f} {name}")
        condition = matrix.condition
        number = f"{condition:.1f}" if np.isfinite(condition) else "not defined"
        self._say(
            f"{', '.join(parts)}; largest over smallest singular value of the "
            f"response: {number}"
        )

    def _paint_closure(self) -> None:
        """Correct one half of the events with the other, and draw the residuals."""
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", NotClosingWarning)  # the text says it
            result = closure_of(
                self.live.table,
                self.live.plan,
                UnfoldingOptions(method=self.method.value),
                beams=self.shared.beams.value,
            )
        caption = self.shared.caption
        self.picture.draw(
            CLOSURE,
            lambda figure: figures.closure_figure(
                result, caption=caption, figure=figure
            ),
        )
        self._say(
            f"probability of a larger χ² if the correction is right on average: "
            f"{result.probability:.2g}"
        )

    def _say(self, text: str) -> None:
        self.numbers.value = f'<div class="toprecon-status">{text}</div>'

    def _rebin(self, n: int) -> None:
        if self._quiet:
            return
        edges = [round(float(x), 12) for x in np.linspace(-1, 1, n + 1)]
        with self.errors.guard():
            self.live.set_settings({"migration.edges": edges})
