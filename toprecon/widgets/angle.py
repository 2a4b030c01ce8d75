"""The angle: generated against reconstructed, the causes of the shift, flips."""

from __future__ import annotations

from typing import Any

import ipywidgets

from toprecon import figures
from toprecon.widgets.base import Panel, Picture

SPECTRUM, CAUSES, FLIPS = "spectrum", "causes of the shift", "wrong hemisphere"


class AnglePanel(Panel):
    """cos(theta) with A_FB, the distortion budget, and where the hemisphere flips."""

    title = "Angle"

    def build(self) -> list[Any]:
        """Make the widgets, top to bottom."""
        self.view = ipywidgets.ToggleButtons(
            options=[SPECTRUM, CAUSES, FLIPS],
            value=SPECTRUM,
            style={"button_width": "12.5em"},
        )
        self.chosen = ipywidgets.Checkbox(
            description="chosen jets, true charge",
            tooltip="the jets that were chosen, with the charge that the truth says",
            indent=False,
            layout=ipywidgets.Layout(width="16em"),
        )
        self.closest = ipywidgets.Checkbox(
            description="jets of the generated quarks",
            tooltip="matched events: the right jets with the true charge",
            indent=False,
            layout=ipywidgets.Layout(width="16em"),
        )
        self._extras = ipywidgets.HBox([self.chosen, self.closest])
        self.picture = Picture()
        self._live_figure: figures.AngleFigure | None = None
        self._made_for: Any = None
        for item in (self.view, self.chosen, self.closest):
            item.observe(lambda _: self.redraw(), names="value")
        return [self.view, self._extras, self.picture.widget]

    def paint(self) -> None:
        """Draw the view chosen."""
        result, caption = self.shared.result, self.shared.caption
        view = self.view.value
        self._extras.layout.display = None if view == SPECTRUM else "none"
        if view == SPECTRUM:
            self._paint_spectrum()
        elif view == CAUSES:
            self.picture.draw(
                view,
                lambda figure: figures.budget_figure(
                    result.asymmetry.budget, caption=caption, figure=figure
                ),
            )
        else:
            self.picture.draw(
                view,
                lambda figure: figures.flip_figure(
                    result.asymmetry, caption=caption, figure=figure
                ),
            )

    def python(self) -> str:
        """Return Python that gives what is shown."""
        beams = self.shared.beams_code
        call = {
            SPECTRUM: f"angle_figure({beams}.asymmetry)",
            CAUSES: f"budget_figure({beams}.asymmetry.budget)",
            FLIPS: f"flip_figure({beams}.asymmetry)",
        }[self.view.value]
        name = call.partition("(")[0]
        return (
            f"from toprecon.figures import {name}\n\n{call}\n"
            f"{beams}.asymmetry.reconstructed, {beams}.asymmetry.shift"
        )

    def _paint_spectrum(self) -> None:
        """Move the curves; make the figure anew only if its rows change."""
        result, caption = self.shared.result, self.shared.caption
        rows = [*figures.usual_variants(result.asymmetry)]
        rows += ["chosen"] if self.chosen.value else []
        rows += ["closest"] if self.closest.value else []
        made_for = (tuple(rows), caption)
        if self._live_figure is None or made_for != self._made_for:
            self._live_figure = figures.AngleFigure(rows, caption=caption)
            self._made_for = made_for
        self._live_figure.update(result.asymmetry, expected=result.is_expected)
        self.picture.show(self._live_figure)
