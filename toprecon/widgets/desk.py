"""The desk: cuts and settings on the left, one figure at a time on the right."""

from __future__ import annotations

import html
from collections.abc import Callable
from typing import Any

import ipywidgets
from matplotlib.figure import Figure

from toprecon import figures
from toprecon.study import (
    BeamsResult,
    Binning,
    LiveStudy,
    StudyPlan,
    sentence_of,
)
from toprecon.widgets.base import (
    STYLE,
    ErrorLine,
    Picture,
    close_all,
    helping,
    labelled,
)
from toprecon.widgets.controls import controls_of
from toprecon.widgets.cuts import CutControls
from toprecon.widgets.terms import TermControls

CAPTION = "simulated events; statistical errors only"
BINS_OF_A_DISTRIBUTION = 60


class Desk:
    """Control surface of a study.

    Parameters
    ----------
    source : EventTable, EventSource, events, path or list of paths
        What is studied; a path may be a catalogue (TOML).
    plan : StudyPlan, optional
        The default plan if absent.
    synchronous : bool
        Work in the calling thread, for tests and notebooks without anybody watching.
    layout, catalogue : optional
        How to read files, see :func:`toprecon.open_events`.

    Notes
    -----
    ``desk.plan`` is the plan as edited, ``desk.result`` the result shown;
    ``desk.live`` is the study beneath, which needs no notebook.
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
        self.errors = ErrorLine()
        self.live = LiveStudy(
            source, plan, synchronous=synchronous, layout=layout, catalogue=catalogue
        )
        self.cuts = CutControls(self.live, self.errors)
        self.terms = TermControls(self.live, self.errors)
        self.status = ipywidgets.HTML()
        self.beams = ipywidgets.Dropdown(
            description="beams",
            options=[("of the plan", "plan")],
            value="plan",
            layout=ipywidgets.Layout(width="16em"),
        )
        self.view = ipywidgets.ToggleButtons(
            options=list(self._makers()),
            value="Angle",
            style={"button_width": "6.5em"},
        )
        self.picture = Picture(760)
        self._drawn = ""
        self.code = ipywidgets.HTML()
        self.settings = controls_of(
            self.live.plan.selection, "selection", self._set_setting
        )
        self.widget = self._arrange()
        for item in (self.view, self.beams):
            item.observe(lambda _: self._redraw(), names="value")
        self.live.on_change(lambda _: self._redraw())
        self._show_busy()
        if not self.live.is_busy:
            self._redraw()

    @property
    def plan(self) -> StudyPlan:
        """The plan as edited."""
        return self.live.plan

    @property
    def result(self) -> Any:
        """The newest result, waiting for it if it is on its way."""
        return self.live.wait()

    @property
    def table(self) -> Any:
        """The event table behind the result."""
        self.live.wait()
        return self.live.table

    def close(self) -> None:
        """Stop the worker and free every widget."""
        self.live.close()
        close_all(self.widget)

    def _ipython_display_(self) -> None:
        from IPython.display import display

        display(self.widget)

    def _arrange(self) -> Any:
        """Put everything in its place."""
        self.plan_file = ipywidgets.Text(
            value="study_plan.toml", layout=ipywidgets.Layout(width="14em")
        )
        save = ipywidgets.Button(description="save plan")
        save.on_click(lambda _: self._save())
        self.folder = ipywidgets.Text(
            value="hand_off", layout=ipywidgets.Layout(width="14em")
        )
        write = ipywidgets.Button(description="write hand-off")
        write.on_click(lambda _: self._hand_off())
        self.done = helping("")
        left = ipywidgets.VBox(
            [
                self.cuts.widget,
                labelled("Selection"),
                *self.settings.values(),
                self.terms.widget,
                labelled("Keep"),
                ipywidgets.HBox([self.plan_file, save]),
                ipywidgets.HBox([self.folder, write]),
                self.done,
            ],
            layout=ipywidgets.Layout(width="29em", margin="0 14px 0 0"),
        )
        right = ipywidgets.VBox(
            [
                ipywidgets.HBox([self.view]),
                self.beams,
                self.picture.widget,
                self.status,
                self.code,
            ],
            layout=ipywidgets.Layout(width="770px"),
        )
        return ipywidgets.VBox(
            [
                ipywidgets.HTML(STYLE),
                self.errors.widget,
                ipywidgets.HBox([left, right]),
            ]
        )

    def _makers(self) -> dict[str, Callable[[BeamsResult, Figure | None], Figure]]:
        """Figures by the name of their button."""
        return {
            "Angle": lambda r, f: figures.angle_figure(
                r.asymmetry, caption=CAPTION, expected=r.is_expected, figure=f
            ),
            "Causes": lambda r, f: figures.budget_figure(
                r.asymmetry.budget, caption=CAPTION, figure=f
            ),
            "Pairing": lambda r, f: figures.class_figure(
                r.asymmetry, caption=CAPTION, figure=f
            ),
            "Flips": lambda r, f: figures.flip_figure(
                r.asymmetry, caption=CAPTION, figure=f
            ),
            "Migration": lambda r, f: figures.matrix_figure(
                r.migration, caption=CAPTION, figure=f
            ),
            "Cuts": lambda _, f: self._distribution(f),
            "Events": lambda r, f: figures.cut_flow_figure(
                r.cut_flow, caption=CAPTION, figure=f
            ),
        }

    def _distribution(self, figure: Figure | None) -> Figure:
        """Draw the observable cut on last, with all other cuts applied."""
        observable = self.cuts.observable
        binning = Binning.regular(BINS_OF_A_DISTRIBUTION, *observable.range)
        row = self.cuts.rows.get(observable.name)
        low, high = (None, None) if row is None else row.limits
        return figures.distribution_figure(
            observable,
            binning,
            self.live.distribution(observable.name, binning),
            low=low,
            high=high,
            caption=CAPTION,
            figure=figure,
        )

    def _redraw(self) -> None:
        """Show the newest result, or why there is none."""
        with self.live.lock, self.errors.guard():
            if self.live.error is not None:
                self.errors.show(str(self.live.error))
                return
            if self.live.shown_plan is None:
                self._show_busy()
                return
            result = self.live.result
            self._offer_beams(["plan", *result.by_helicity])
            beams = result.by_helicity.get(self.beams.value, result.beams)
            make = self._makers()[self.view.value]
            if self._drawn != self.view.value:  # views differ in size
                self.picture.figure, self._drawn = None, self.view.value
            self.picture.draw(lambda figure: make(beams, figure))
            self.errors.show("")
            self._say(sentence_of(beams))
            code = html.escape(self.live.code())
            self.code.value = (
                "<details><summary>the same in Python</summary>"
                f"<pre>{code}</pre></details>"
            )

    def _offer_beams(self, names: list[str]) -> None:
        """Offer the beams that the samples have."""
        labels = {"plan": "of the plan", "LR": "LR (e-L e+R)", "RL": "RL (e-R e+L)"}
        choices = [(labels[name], name) for name in names]
        if list(self.beams.options) != choices:
            value = self.beams.value if self.beams.value in names else "plan"
            self.beams.options = choices
            self.beams.value = value

    def _show_busy(self) -> None:
        """Say that a result is on its way."""
        if self.live.is_busy:
            self._say("working ...")

    def _say(self, text: str) -> None:
        """Put a sentence where screen readers announce it."""
        self.status.value = (
            f'<p class="toprecon-status" role="status" aria-live="polite">'
            f"{html.escape(text)}</p>"
        )

    def _set_setting(self, path: str, value: Any) -> None:
        with self.errors.guard():
            self.live.set_settings({path: value})

    def _save(self) -> None:
        with self.errors.guard():
            path = self.live.plan.save(self.plan_file.value)
            self._tell(f"plan saved as {path}")

    def _hand_off(self) -> None:
        with self.errors.guard():
            folder = self.live.wait().hand_off(self.folder.value)
            self._tell(f"hand-off written to {folder}")

    def _tell(self, text: str) -> None:
        self.errors.show("")
        self.done.value = (
            f'<p class="toprecon-help" role="status">{html.escape(text)}</p>'
        )
