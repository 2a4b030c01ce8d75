"""Cuts: a range slider with text boxes for every observable that is cut on."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import ipywidgets

from toprecon.study import OBSERVABLES, CutOptions, LiveStudy, Observable
from toprecon.widgets.base import ErrorLine, close_all, helping, labelled

STEPS = 200
"""Steps of a slider over the range of its observable."""

BY_NAME = {item.name: item for item in OBSERVABLES}


class CutRow:
    """Controls of the cut on one observable.

    The slider and the boxes show the same two limits; a limit at the end of the range
    is no limit. The boxes also take values that are off the steps of the slider.
    """

    def __init__(
        self, cut: CutOptions, change: Callable[[], None], remove: Callable[[], None]
    ) -> None:
        self.observable = BY_NAME[cut.observable]
        low, high = self.observable.range
        self._change = change
        self._quiet = False
        values = (
            low if cut.low is None else cut.low,
            high if cut.high is None else cut.high,
        )
        self.on = ipywidgets.Checkbox(
            value=cut.on,
            indent=False,
            description=self.observable.axis_label,
            tooltip=self.observable.meaning,
            layout=ipywidgets.Layout(width="17em"),
        )
        self.slider = ipywidgets.FloatRangeSlider(
            value=(min(max(values[0], low), high), max(min(values[1], high), low)),
            min=low,
            max=high,
            step=(high - low) / STEPS,
            readout=False,
            layout=ipywidgets.Layout(width="15em"),
        )
        box = {
            "layout": ipywidgets.Layout(width="6em"),
            "step": (high - low) / STEPS,
        }
        self.low = ipywidgets.FloatText(value=values[0], tooltip="lowest kept", **box)
        self.high = ipywidgets.FloatText(
            value=values[1], tooltip="first value dropped", **box
        )
        self.remove = ipywidgets.Button(
            description="remove", layout=ipywidgets.Layout(width="5em")
        )
        self.remove.on_click(lambda _: remove())
        self.widget = ipywidgets.VBox(
            [
                ipywidgets.HBox([self.on, self.remove]),
                ipywidgets.HBox([self.low, self.slider, self.high]),
            ],
            layout=ipywidgets.Layout(margin="0 0 8px 0"),
        )
        self.slider.observe(self._slid, names="value")
        for item in (self.low, self.high):
            item.observe(self._typed, names="value")
        self.on.observe(lambda _: change(), names="value")

    @property
    def limits(self) -> tuple[float | None, float | None]:
        """Limits as the plan wants them."""
        low, high = self.observable.range
        return (
            None if self.low.value <= low else self.low.value,
            None if self.high.value >= high else self.high.value,
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


class CutControls:
    """All cuts of the plan, and a way to add one."""

    def __init__(self, live: LiveStudy, errors: ErrorLine) -> None:
        self._live = live
        self._errors = errors
        self.rows: dict[str, CutRow] = {}
        self.add = ipywidgets.Dropdown(
            options=[("add a cut on ...", ""), *_choices()],
            value="",
            layout=ipywidgets.Layout(width="24em"),
        )
        self.add.observe(self._added, names="value")
        self._box = ipywidgets.VBox([])
        self.widget = ipywidgets.VBox(
            [
                labelled("Cuts"),
                self._box,
                self.add,
                helping("low limit inclusive, high limit exclusive; an end of the "
                        "slider is no limit"),
            ]
        )  # fmt: skip
        for cut in live.plan.cuts:
            self._make(cut)
        self._show()

    @property
    def observable(self) -> Observable:
        """The observable cut on last, or the chi-square of the pairing."""
        names = list(self.rows)
        return BY_NAME[names[-1] if names else "pairing.chi2"]

    def _added(self, event: Any) -> None:
        name = event["new"]
        if not name:
            return
        self.add.value = ""
        if name not in self.rows:
            with self._errors.guard():
                self._make(CutOptions(observable=name))
                self._show()
                self._live.set_cut(name)

    def _make(self, cut: CutOptions) -> None:
        name = cut.observable
        self.rows[name] = CutRow(
            cut, lambda: self._changed(name), lambda: self._removed(name)
        )

    def _changed(self, name: str) -> None:
        with self._errors.guard():
            row = self.rows[name]
            low, high = row.limits
            self._live.set_cut(name, low, high, on=row.on.value)

    def _removed(self, name: str) -> None:
        row = self.rows.pop(name)
        self._show()
        close_all(row.widget)
        with self._errors.guard():
            cuts = [c for c in self._live.plan.cuts if c.observable != name]
            self._live.configure(cuts=tuple(cuts))

    def _show(self) -> None:
        self._box.children = [row.widget for row in self.rows.values()]


def _choices() -> list[tuple[str, str]]:
    """Observables by label."""
    return [(item.axis_label, item.name) for item in OBSERVABLES]
