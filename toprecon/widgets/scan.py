"""Scan: what other cuts would cost and cure, and the best of them."""

from __future__ import annotations

import html
from typing import Any

import ipywidgets
import numpy as np

from toprecon import figures
from toprecon.study import Keep, ScanAxis, ScanOptions, scan_cuts
from toprecon.widgets.base import Panel
from toprecon.widgets.observables import (
    BY_NAME,
    USUALLY_CUT_FROM_ABOVE,
    observable_in,
    offer,
)
from toprecon.widgets.parts import Picture, helping

POINTS = 50
"""Cut values along each axis."""

NOTHING = ("no second cut", "")


class ScanPanel(Panel):
    """Bias and error of A_FB for many values of one or two cuts."""

    title = "Scan"

    def build(self) -> list[Any]:
        """Make the widgets, top to bottom."""
        defaults = ScanOptions()
        self.first = self._choice("pairing.chi2")
        self.second = self._choice("", NOTHING)
        self.keep_first, self.keep_second = self._side(), self._side()
        fields = ScanOptions.model_fields
        self.bias = ipywidgets.Dropdown(
            description="bias",
            options=[("to all generated", "total"), ("to the selected", "shift")],
            value=defaults.bias.value,
            tooltip=fields["bias"].description,
            style={"description_width": "4em"},
            layout=ipywidgets.Layout(width="15em"),
        )
        self.residual = ipywidgets.BoundedFloatText(
            value=defaults.residual,
            min=0,
            max=1,
            step=0.1,
            description="share left",
            tooltip=fields["residual"].description,
            style={"description_width": "6em"},
            layout=ipywidgets.Layout(width="12em"),
        )
        self.smallest = ipywidgets.BoundedFloatText(
            value=0.1,
            min=0,
            max=1,
            step=0.05,
            description="least efficiency",
            tooltip=fields["smallest_efficiency"].description,
            style={"description_width": "8em"},
            layout=ipywidgets.Layout(width="14em"),
        )
        self.picture = Picture()
        self.best = ipywidgets.HTML()
        self.take = ipywidgets.Button(
            description="take this point",
            tooltip="put the cuts of the best point into the plan",
            layout=ipywidgets.Layout(width="10em"),
        )
        self.take.on_click(lambda _: self._take())
        self._point: Any = None
        self.first.observe(self._first_chosen, names="value")
        controls = (self.second, self.keep_first, self.keep_second, self.bias)
        for item in (*controls, self.residual, self.smallest):
            item.observe(lambda _: self.redraw(), names="value")
        return [
            ipywidgets.HBox([self.first, self.keep_first]),
            ipywidgets.HBox([self.second, self.keep_second]),
            ipywidgets.HBox([self.bias, self.residual, self.smallest]),
            helping("total error: statistical and what is left of the bias, squared"),
            self.picture.widget,
            ipywidgets.HBox([self.take, self.best]),
        ]

    def paint(self) -> None:
        """Scan and draw, once the study has settled."""
        offer(self.first, self.live)
        offer(self.second, self.live, NOTHING)
        if not self.live.is_settled:
            return
        axes = self.axes()
        result = scan_cuts(
            self.live.table,
            self.live.plan,
            *axes,
            options=self.options(),
            beams=self.shared.beams.value,
        )
        self._point = None  # until there is one
        self._point = point = result.best
        labels = tuple(
            observable_in(self.live.plan, axis.observable).axis_label for axis in axes
        )
        caption = self.shared.caption
        if not self.shared.result.is_expected:
            caption += " · events of the simulation, no luminosity stated"
        self.picture.draw(
            f"scan of {len(axes)}",
            lambda figure: figures.scan_figure(
                result, labels=labels, best=point, caption=caption, figure=figure
            ),
        )
        text = html.escape(f"{point}".replace("+-", "±"))
        self.best.value = (
            f'<p class="toprecon-status" role="status">{text} '
            f"(chosen on half A, quoted on half B)</p>"
        )

    def python(self) -> str:
        """Return Python that gives what is shown."""
        axes = "".join(
            f'    ScanAxis.spread("{name}", table["{name}"][rows], n={POINTS}, '
            f'keep="{side}"),\n'
            for name, side in self._axes()
        )
        options = ", ".join(
            f"{name}={value!r}"
            for name, value in self.options().to_mapping().items()
            if name in {"bias", "residual", "smallest_efficiency"}
        )
        beams = self.shared.beams.value
        return (
            "from toprecon.study import LiveStudy, ScanAxis, ScanOptions, scan_cuts\n\n"
            "table = LiveStudy(source, plan, synchronous=True).table\n"
            'rows = table["stage"] == 0\n'
            f"axes = (\n{axes})\n"
            f"options = ScanOptions({options})\n"
            f'scan = scan_cuts(table, plan, *axes, options=options, beams="{beams}")\n'
            "better = plan.with_cuts(scan.best.cuts)"
        )

    def options(self) -> ScanOptions:
        """Return how points are judged."""
        return ScanOptions(
            bias=self.bias.value,
            residual=self.residual.value,
            smallest_efficiency=self.smallest.value,
        )

    def axes(self) -> list[ScanAxis]:
        """Return the cut values tried, spread evenly over the selected events."""
        table = self.live.table
        rows = np.flatnonzero(table["stage"] == 0)
        return [
            ScanAxis.spread(name, table[name][rows], n=POINTS, keep=Keep(side))
            for name, side in self._axes()
        ]

    def _axes(self) -> list[tuple[str, str]]:
        """Names of the observables scanned, and the side kept."""
        pairs = (
            (self.first.value, self.keep_first.value),
            (self.second.value, self.keep_second.value),
        )
        return [(name, side) for name, side in pairs if name]

    def _first_chosen(self, event: Any) -> None:
        """Keep the side that is usually kept."""
        side = "below" if event["new"] in USUALLY_CUT_FROM_ABOVE else "above"
        if self.keep_first.value != side:
            self.keep_first.value = side  # which draws
        else:
            self.redraw()

    def _take(self) -> None:
        with self.errors.guard():
            if self._point is not None:
                self.live.set_plan(self.live.plan.with_cuts(self._point.cuts))

    def _choice(self, value: str, *first: tuple[str, str]) -> Any:
        """Return a list of observables."""
        options = [*first, *((item.axis_label, item.name) for item in BY_NAME.values())]
        return ipywidgets.Dropdown(
            description="and" if first else "cut on",
            options=options,
            value=value,
            style={"description_width": "4em"},
            layout=ipywidgets.Layout(width="28em"),
        )

    def _side(self) -> Any:
        """Return a choice of the side kept."""
        return ipywidgets.Dropdown(
            description="keep",
            options=[("below the cut", "below"), ("from the cut upwards", "above")],
            value="below",
            style={"description_width": "3em"},
            layout=ipywidgets.Layout(width="15em"),
        )
