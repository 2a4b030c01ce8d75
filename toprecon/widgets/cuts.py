"""Cuts: a range slider under the distribution of every observable that is cut on."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import ipywidgets

from toprecon.figures import CutFigure, class_legend, png
from toprecon.study import Binning, CutOptions, Observable
from toprecon.widgets.base import Panel
from toprecon.widgets.observables import observable_in, offer
from toprecon.widgets.parts import Picture, close_all, helping, labelled

STEPS = 200
"""Steps of a slider over the range of its observable."""

BINS = 50
WIDTH = 390
"""Width of slider and distribution [px]."""

NOTHING = ("add a cut on ...", "")


class CutRow:
    """Controls of the cut on one observable.

    The slider and the boxes show the same two limits; a limit at the end of the range
    is no limit. The boxes also take values that are off the steps of the slider.
    """

    def __init__(
        self,
        observable: Observable,
        cut: CutOptions,
        change: Callable[[], None],
        remove: Callable[[], None],
    ) -> None:
        self.observable = observable
        self.binning = Binning.regular(BINS, *self.observable.range)
        low, high = self.observable.range
        self.known = cut
        self._change = change
        self._quiet = False
        values = self._ends(cut)
        self.strip = CutFigure(
            self.observable, self.binning, size=(WIDTH / 100, 0.92), with_axes=False
        )
        self.picture = Picture(WIDTH)
        self.on = ipywidgets.Checkbox(
            value=cut.on,
            indent=False,
            description=self.observable.axis_label,
            tooltip=self.observable.meaning,
            layout=ipywidgets.Layout(width="auto", flex="1 1 auto"),
        )
        self.slider = ipywidgets.FloatRangeSlider(
            value=(min(max(values[0], low), high), max(min(values[1], high), low)),
            min=low,
            max=high,
            step=(high - low) / STEPS,
            readout=False,
            layout=ipywidgets.Layout(width=f"{WIDTH}px", margin="0"),
        )
        box = {
            "style": {"description_width": "3.2em"},
            "layout": ipywidgets.Layout(width="11em"),
            "step": (high - low) / STEPS,
        }
        self.low = ipywidgets.FloatText(
            value=values[0], description="from", tooltip="lowest value kept", **box
        )
        self.high = ipywidgets.FloatText(
            value=values[1], description="below", tooltip="first value dropped",
            **{**box, "layout": ipywidgets.Layout(width="11em")},
        )  # fmt: skip
        self.remove = ipywidgets.Button(
            description="remove",
            tooltip=f"take out the cut on {self.observable.label}",
            layout=ipywidgets.Layout(width="5.5em"),
        )
        self.remove.on_click(lambda _: remove())
        self.widget = ipywidgets.VBox(
            [
                ipywidgets.HBox([self.on, self.remove]),
                self.picture.widget,
                self.slider,
                ipywidgets.HBox(
                    [self.low, self.high],
                    layout=ipywidgets.Layout(justify_content="space-between"),
                ),
            ],
            layout=ipywidgets.Layout(width=f"{WIDTH + 8}px", margin="0 0 10px 0"),
        )
        self.slider.observe(self._slid, names="value")
        for item in (self.low, self.high):
            item.observe(self._typed, names="value")
        self.on.observe(self._switched, names="value")

    @property
    def limits(self) -> tuple[float | None, float | None]:
        """Limits as the plan wants them."""
        low, high = self.observable.range
        return (
            None if self.low.value <= low else self.low.value,
            None if self.high.value >= high else self.high.value,
        )

    def follow(self, cut: CutOptions) -> None:
        """Take a cut over that was not made with these controls."""
        if cut == self.known:
            return
        self.known = cut
        self._quiet = True
        try:
            self.on.value = cut.on
            self.low.value, self.high.value = self._ends(cut)
            low, high = self.observable.range
            self.slider.value = (
                min(max(self.low.value, low), high),
                max(min(self.high.value, high), low),
            )
        finally:
            self._quiet = False

    def _ends(self, cut: CutOptions) -> tuple[float, float]:
        """Limits of a cut, no limit being an end of the slider."""
        low, high = self.observable.range
        return (
            low if cut.low is None else cut.low,
            high if cut.high is None else cut.high,
        )

    def _slid(self, event: Any) -> None:
        if self._quiet:
            return
        self._quiet = True
        try:
            (old_low, old_high), (low, high) = event["old"], event["new"]
            if low != old_low:
                self.low.value = round(low, 6)
            if high != old_high:
                self.high.value = round(high, 6)
        finally:
            self._quiet = False
        self._change()

    def _switched(self, _: Any) -> None:
        if not self._quiet:
            self._change()

    def _typed(self, _: Any) -> None:
        if self._quiet:
            return
        low, high = self.observable.range
        self._quiet = True
        try:
            if self.low.value <= self.high.value:
                self.slider.value = (
                    min(max(self.low.value, low), high),
                    max(min(self.high.value, high), low),
                )
        finally:
            self._quiet = False
        self._change()


class CutsPanel(Panel):
    """All cuts of the plan, the distribution behind each, and a way to add one."""

    title = "Cuts"

    def build(self) -> list[Any]:
        """Make the widgets, top to bottom."""
        self.rows: dict[str, CutRow] = {}
        self._shown: dict[str, Any] = {}
        self._classes: tuple[str, ...] = ()
        self.legend = ipywidgets.Image(
            format="png", layout=ipywidgets.Layout(width=f"{WIDTH}px")
        )
        self.add = ipywidgets.Dropdown(
            options=[NOTHING],
            value="",
            layout=ipywidgets.Layout(width=f"{WIDTH}px"),
        )
        self.add.observe(self._added, names="value")
        self._box = ipywidgets.VBox([])
        for cut in self.live.plan.cuts:
            self._make(cut)
        self._arrange()
        return [
            labelled("Cuts"),
            self._box,
            self.legend,
            self.add,
            helping("behind each slider: all other cuts applied"),
            helping("the end of a slider is no limit"),
        ]

    def paint(self) -> None:
        """Show the limits; once the study settles, the distributions too."""
        self._follow_plan()
        offer(self.add, self.live, NOTHING)
        for name, row in self.rows.items():
            limits = row.limits if row.on.value else (None, None)
            if self.live.is_settled or name not in self._shown:
                classes = self.live.distribution(
                    name, row.binning, beams=self.shared.beams.value
                )
                row.strip.update(classes, low=limits[0], high=limits[1])
                self._show_legend(classes)
            elif self._shown[name] != limits:
                row.strip.move(*limits)
            else:
                continue
            self._shown[name] = limits
            row.picture.show(row.strip)

    def python(self) -> str:
        """Return Python that gives what is shown."""
        return f"print({self.shared.beams_code}.cut_flow)"

    def _show_legend(self, classes: dict[str, Any]) -> None:
        """Name the classes that the distributions have."""
        names = tuple(dict.fromkeys([*self._classes, *classes]))
        if names != self._classes:
            self._classes = names
            self.legend.value = png(class_legend(names, width=WIDTH / 100))

    def _follow_plan(self) -> None:
        """Add and drop rows for cuts that others put into or took out of the plan."""
        cuts = {cut.observable: cut for cut in self.live.plan.cuts}
        for name, row in list(self.rows.items()):
            if row.observable != self._observable(name):
                close_all(self.rows.pop(name).widget)  # another range: made anew below
                self._shown.pop(name, None)
            elif name in cuts:
                row.follow(cuts[name])
        if list(cuts) == list(self.rows):
            return
        for name in [name for name in self.rows if name not in cuts]:
            close_all(self.rows.pop(name).widget)
            self._shown.pop(name, None)
        for name, cut in cuts.items():
            if name not in self.rows:
                self._make(cut)
        self.rows = {name: self.rows[name] for name in cuts}
        self._arrange()

    def _added(self, event: Any) -> None:
        name = event["new"]
        if not name:
            return
        self.add.value = ""
        if name not in self.rows:
            with self.live.lock, self.errors.guard():
                self._make(CutOptions(observable=name))
                self._arrange()
                self.live.set_cut(name)

    def _make(self, cut: CutOptions) -> None:
        name = cut.observable
        self.rows[name] = CutRow(
            self._observable(name),
            cut,
            lambda: self._changed(name),
            lambda: self._removed(name),
        )

    def _observable(self, name: str) -> Observable:
        """Return an observable as it is in the result shown."""
        return observable_in(self.live.shown_plan or self.live.plan, name)

    def _changed(self, name: str) -> None:
        with self.errors.guard():
            row = self.rows[name]
            low, high = row.limits
            cut = CutOptions(observable=name, low=low, high=high, on=row.on.value)
            row.known = cut  # so that the answer does not move what is being moved
            self.live.set_cut(name, low, high, on=cut.on)

    def _removed(self, name: str) -> None:
        with self.live.lock, self.errors.guard():
            row = self.rows.pop(name)
            self._shown.pop(name, None)
            self._arrange()
            close_all(row.widget)
            self.live.remove_cut(name)

    def _arrange(self) -> None:
        self._box.children = [row.widget for row in self.rows.values()]
