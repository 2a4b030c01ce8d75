"""The angle: generated against reconstructed, the causes of the shift, flips."""

from __future__ import annotations

import html
import math
from typing import Any

import ipywidgets

from toprecon import figures
from toprecon.errors import StudyError
from toprecon.study import bias_meaning
from toprecon.widgets.base import Panel
from toprecon.widgets.parts import Picture

SPECTRUM, CAUSES, FLIPS = "spectrum", "causes of the shift", "wrong hemisphere"

COUPLINGS = {
    "f1v_photon": "vector, photon",
    "f1v_z": "vector, Z",
    "f1a_z": "axial, Z",
    "f2v_photon": "magnetic, photon",
    "f2v_z": "weak magnetic, Z",
}
"""Form factors as people call them."""


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
        self.meaning = ipywidgets.HTML()
        return [self.view, self._extras, self.picture.widget, self.meaning]

    def paint(self) -> None:
        """Draw the view chosen."""
        result, caption = self.shared.result, self.shared.caption
        view = self.view.value
        self._extras.layout.display = None if view == SPECTRUM else "none"
        self.meaning.layout.display = "none" if view == FLIPS else None
        if view == SPECTRUM:
            self._paint_spectrum()
            if self.live.is_settled:
                self.meaning.value = self._estimators()
        elif view == CAUSES:
            self.picture.draw(
                view,
                lambda figure: figures.budget_figure(
                    result.asymmetry.budget, caption=caption, figure=figure
                ),
            )
            if self.live.is_settled:
                self.meaning.value = self._meaning()
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

    def _estimators(self) -> str:
        """Return A_FB as a measurement would quote it, in HTML."""
        result, options = self.shared.result, self.live.plan.asymmetry
        found = result.asymmetry.estimators(options)
        error = result.asymmetry.expected_error
        expected = (
            f" In the expected data the error of A_FB is {error:.2g}."
            if result.is_expected
            else ""
        )
        return (
            f'<p class="toprecon-status">Reconstructed within |cos θ| ≤ '
            f"{found.largest_cosine:g}, extrapolated with the generated shape: counting "
            f"{_text(found.counting.extrapolated)}, fit of the angular terms "
            f"{_text(found.fit.extrapolated)} (correlation {found.correlation:.2f})."
            f"{expected}</p>"
        )

    def _meaning(self) -> str:
        """Return what the whole shift would be mistaken for, in HTML."""
        try:
            meaning = bias_meaning(self.live.result, self.shared.beams.value)
        except StudyError as error:
            return f'<p class="toprecon-help">{html.escape(str(error))}</p>'
        deviations = meaning.standard_deviations
        head = (
            ""
            if math.isnan(deviations.value)
            else f"The whole shift is {_text(deviations)} standard deviations of the "
            "expected data. "
        )
        rows = "".join(
            f"<tr><td>{COUPLINGS.get(name, html.escape(name))}</td>"
            f"<td>{_text(item.shift)}</td><td>{_share(item.relative)}</td></tr>"
            for name, item in meaning.couplings.items()
        )
        return (
            f'<p class="toprecon-status">{head}It would be mistaken for a change of '
            f'one of these couplings:</p><table class="toprecon-table"><tr>'
            f"<th>coupling of the top</th><th>change</th><th>of its value</th></tr>{rows}"
            f'</table><p class="toprecon-help">{html.escape(meaning.caution)}</p>'
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


def _text(number: Any) -> str:
    """Return a number with its error, for people."""
    return str(number).replace("+-", "±").replace("-", "−")


def _share(value: float) -> str:
    """Return a share in per cent; nothing if it is not defined."""
    return "" if math.isnan(value) else f"{100 * value:+.1f} %".replace("-", "−")
