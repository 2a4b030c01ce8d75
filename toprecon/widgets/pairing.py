"""Pairing: classes with their A_FB, what a cut makes of them, and the chi-square."""

from __future__ import annotations

from typing import Any

import ipywidgets

from toprecon import figures
from toprecon.study import Binning
from toprecon.widgets.base import Panel
from toprecon.widgets.calibrating import CalibrationControls
from toprecon.widgets.controls import OptionControls
from toprecon.widgets.observables import (
    BY_NAME,
    USUALLY_CUT_FROM_ABOVE,
    observable_in,
    offer,
)
from toprecon.widgets.parts import Picture, helping, labelled
from toprecon.widgets.terms import TermControls

CLASSES, DISTRIBUTION, PURITY = "classes", "distribution", "purity against a cut"
SECTIONS = (
    "Calibration",
    "Terms of the chi-square",
    "Pairing",
    "Constrained fit",
)
BINS, FINE_BINS = 60, 240


class PairingPanel(Panel):
    """How often the pairing is right, and the settings that decide it."""

    title = "Pairing"

    def build(self) -> list[Any]:
        """Make the widgets, top to bottom."""
        self.view = ipywidgets.ToggleButtons(
            options=[CLASSES, DISTRIBUTION, PURITY],
            value=CLASSES,
            style={"button_width": "12.5em"},
        )
        self.observable = ipywidgets.Dropdown(
            description="of",
            options=[(item.axis_label, item.name) for item in BY_NAME.values()],
            value="pairing.chi2",
            style={"description_width": "2em"},
            layout=ipywidgets.Layout(width="22em"),
        )
        self.picture = Picture()
        for item in (self.view, self.observable):
            item.observe(lambda _: self.redraw(), names="value")
        self.terms = TermControls(self)
        self.settings = OptionControls(self, self.live.plan.pairing, "pairing")
        self.calibration = CalibrationControls(self)
        self.fit = OptionControls(self, self.live.plan.fit, "fit")
        self.sections = ipywidgets.Accordion(
            children=[
                self.calibration.widget,
                self.terms.widget,
                self.settings.widget,
                self.fit.widget,
            ],
            titles=SECTIONS,
            selected_index=0,
        )
        note = []
        if not self.live.can_reconstruct:
            self.terms.disable()
            self.settings.disable()
            self.calibration.disable()
            self.fit.disable()
            note = [
                helping("fixed: the study runs on a saved event table, without events")
            ]
        return [
            self.view,
            self.observable,
            self.picture.widget,
            labelled("Settings"),
            *note,
            self.sections,
        ]

    def paint(self) -> None:
        """Draw the view chosen."""
        caption, view = self.shared.caption, self.view.value
        self.terms.follow(self.live.plan.pairing)
        self.settings.follow(self.live.plan.pairing)
        self.fit.follow(self.live.plan.fit)
        offer(self.observable, self.live)
        self.observable.layout.display = "none" if view == CLASSES else None
        if view == CLASSES:
            result = self.shared.result
            self.picture.draw(
                view,
                lambda figure: figures.class_figure(
                    result.asymmetry, caption=caption, figure=figure
                ),
            )
            return
        if not self.live.is_settled:
            return
        plan = self.live.shown_plan or self.live.plan
        observable = observable_in(plan, self.observable.value)
        n = BINS if view == DISTRIBUTION else FINE_BINS
        binning = Binning.regular(n, *observable.range)
        classes = self.live.distribution(
            observable.name, binning, beams=self.shared.beams.value
        )
        low, high = self._limits(observable.name)
        if view == DISTRIBUTION:
            figure = figures.CutFigure(observable, binning, caption=caption)
            figure.update(classes, low=low, high=high)
            self.picture.show(figure)
            return
        self.picture.draw(
            view,
            lambda figure: figures.purity_figure(
                observable,
                binning,
                classes,
                low=low,
                high=high,
                is_upper=observable.name in USUALLY_CUT_FROM_ABOVE,
                caption=caption,
                figure=figure,
            ),
        )

    def python(self) -> str:
        """Return Python that gives what is shown."""
        beams = self.shared.beams_code
        if self.view.value == CLASSES:
            return (
                "from toprecon.figures import class_figure\n\n"
                f"class_figure({beams}.asymmetry)\n"
                f"{beams}.asymmetry.by_class"
            )
        observable = observable_in(self.live.plan, self.observable.value)
        low, high = observable.range
        n = BINS if self.view.value == DISTRIBUTION else FINE_BINS
        return (
            "from toprecon.study import Binning, LiveStudy\n\n"
            "live = LiveStudy(source, plan, synchronous=True)\n"
            f"bins = Binning.regular({n}, {low:g}, {high:g})\n"
            f'live.distribution("{observable.name}", bins)'
        )

    def _limits(self, name: str) -> tuple[float | None, float | None]:
        """Limits of the cut in use on an observable."""
        for cut in self.live.plan.active_cuts:
            if cut.observable == name:
                return cut.low, cut.high
        return None, None
