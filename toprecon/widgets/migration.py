"""Migration: where the events of every generated bin are reconstructed."""

from __future__ import annotations

from typing import Any

import ipywidgets
import numpy as np

from toprecon import figures
from toprecon.widgets.base import Panel, Picture, helping


class MigrationPanel(Panel):
    """The migration matrix with purity, stability and efficiency."""

    title = "Migration"

    def build(self) -> list[Any]:
        """Make the widgets, top to bottom."""
        edges = self.live.plan.migration.edges
        self._quiet = False
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
        self.picture = Picture()
        self.numbers = ipywidgets.HTML()
        return [
            ipywidgets.HBox(
                [self.bins, helping("equal bins; other edges can be set in the plan")]
            ),
            self.picture.widget,
            self.numbers,
        ]

    def paint(self) -> None:
        """Draw the matrix and say how hard it is to undo."""
        matrix, caption = self.shared.result.migration, self.shared.caption
        n = len(self.live.plan.migration.edges) - 1
        if n != self.bins.value:  # changed elsewhere, perhaps to unequal bins
            self._quiet = True
            self.bins.value = n
            self._quiet = False
        self.picture.draw(
            "matrix",
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
        self.numbers.value = (
            f'<div class="toprecon-status">{", ".join(parts)}; largest over smallest '
            f"singular value of the response: {number}</div>"
        )

    def python(self) -> str:
        """Return Python that gives what is shown."""
        return (
            "from toprecon.figures import matrix_figure\n\n"
            f"matrix_figure({self.shared.beams_code}.migration)"
        )

    def _rebin(self, n: int) -> None:
        if self._quiet:
            return
        edges = [round(float(x), 12) for x in np.linspace(-1, 1, n + 1)]
        with self.errors.guard():
            self.live.set_settings({"migration.edges": edges})
