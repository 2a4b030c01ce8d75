"""The distribution behind a cut, and the cut flow."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from typing import Any

import numpy as np
from matplotlib.figure import Figure
from matplotlib.patches import Patch
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from toprecon.events import Binning, CutFlow, Observable
from toprecon.figures import style
from toprecon.figures.live import LiveFigure, top_of_axis

STRIP = (0.012, 0.24, 0.966, 0.74)
"""Place of the axes of a strip: its ends lie over those of the slider beneath."""

Classes = Mapping[str, NDArray[np.float64]]


class CutFigure(LiveFigure):
    """An observable, stacked by class, with the range that a cut keeps.

    Parameters
    ----------
    observable : Observable
        What is drawn.
    binning : Binning
        Bins.
    size : tuple of float
        Width and height [inch].
    with_axes : bool
        Whether axes, labels and a legend are drawn; a strip over a slider has none.
    caption : str
        Small print: what the numbers rest on.
    """

    def __init__(
        self,
        observable: Observable,
        binning: Binning,
        *,
        size: tuple[float, float] = (7.2, 2.7),
        with_axes: bool = True,
        caption: str = "",
    ) -> None:
        super().__init__(size)
        self._binning = binning
        self._with_axes = with_axes
        place = (0.11, 0.2, 0.64, 0.7) if with_axes else STRIP
        self._axes = axes = self.figure.add_axes(place)
        edges = binning.array
        self._parts: dict[str, Any] = {}
        nothing = np.zeros(len(binning))
        for name, (label, color, hatch) in style.CLASSES.items():
            self._parts[name] = axes.stairs(
                nothing, edges, baseline=nothing, fill=True, facecolor=color,
                alpha=0.55, hatch=hatch, edgecolor=color, linewidth=0, label=label,
                zorder=1,
            )  # fmt: skip
        self._outline = axes.stairs(nothing, edges, color=style.INK, linewidth=0.9)
        self._veils = tuple(
            axes.axvspan(0, 0, color="#f4f5f6", alpha=0.86, linewidth=0, zorder=3)
            for _ in range(2)
        )
        self._limits = tuple(
            axes.axvline(0, color=style.INK, linewidth=1.5, zorder=4) for _ in range(2)
        )
        axes.set(xlim=(edges[0], edges[-1]), ylim=(0, 1e-9))
        style.tidy(axes)
        if with_axes:
            axes.set_xlabel(observable.axis_label)
            axes.set_ylabel("sum of weights")
            self.text(0.012, 0.03, caption, fontsize=7.5, color=style.FAINT)
        else:
            axes.set_yticks([])
            axes.spines["left"].set_visible(False)
            axes.tick_params(labelsize=8, length=2, pad=2)
            self._keep_labels_inside()

    def update(
        self, classes: Classes, *, low: float | None = None, high: float | None = None
    ) -> None:
        """Show other sums and limits.

        Parameters
        ----------
        classes : mapping of array, shape (B,)
            Sums of weights by class.
        low, high : float, optional
            The range kept; the rest is veiled.
        """
        base = np.zeros(len(self._binning))
        for name, part in self._parts.items():
            part.set_visible(name in classes)
            if name in classes:
                top = base + classes[name]
                part.set_data(top, baseline=base)
                base = top
        self._outline.set_data(base)
        axes, highest = self._axes, float(base.max(initial=0))
        if self._with_axes:
            axes.set_ylim(0, top_of_axis(highest, axes.get_ylim()[1]))
            self._legend()
        else:
            axes.set_ylim(0, max(1.05 * highest, 1e-9))
        self.move(low, high)

    def move(self, low: float | None, high: float | None) -> None:
        """Show other limits only."""
        left, right = self._binning.edges[0], self._binning.edges[-1]
        start = left if low is None else min(max(low, left), right)
        stop = right if high is None else max(min(high, right), left)
        for veil, (a, b) in zip(
            self._veils, ((left, start), (stop, right)), strict=True
        ):
            veil.set_x(a)
            veil.set_width(b - a)
        for line, value, end in zip(
            self._limits, (start, stop), (left, right), strict=True
        ):
            line.set_xdata([value, value])
            line.set_visible(value != end)

    def _keep_labels_inside(self) -> None:
        """Let the labels at the ends of the axis grow inwards."""
        ends = self._binning.edges[0], self._binning.edges[-1]
        ticks = np.asarray(MaxNLocator(6).tick_values(*ends))
        ticks = ticks[(ticks >= ends[0]) & (ticks <= ends[1])]
        self._axes.set_xticks(ticks)
        labels = self._axes.get_xticklabels()
        for tick, label in zip(ticks, labels, strict=True):
            label.set_horizontalalignment(
                "left" if tick == ends[0] else "right" if tick == ends[1] else "center"
            )

    def _legend(self) -> None:
        """Name the classes that are there."""
        shown = [part for part in self._parts.values() if part.get_visible()]
        self._axes.legend(
            handles=shown[::-1], loc="upper left", bbox_to_anchor=(1.01, 1.02),
            frameon=False, fontsize=9, labelcolor=style.INK,
        )  # fmt: skip


def class_legend(names: Iterable[str], *, width: float = 3.9) -> Figure:
    """Draw the colours and hatchings of some classes, for strips without a legend.

    Parameters
    ----------
    names : iterable of str
        Classes, as in the sums.
    width : float
        Width [inch].

    Returns
    -------
    Figure
        A legend and nothing else.
    """
    shown = [style.CLASSES[name] for name in style.CLASSES if name in set(names)]
    rows = max(1, math.ceil(len(shown) / 2))
    figure = style.blank(None, (width, 0.06 + 0.2 * rows))
    patches = [
        Patch(facecolor=c, alpha=0.55, hatch=h, edgecolor=c, linewidth=0, label=label)
        for label, c, h in shown
    ]
    figure.legend(
        handles=patches, loc="center left", bbox_to_anchor=(0.0, 0.5), ncols=2,
        frameon=False, fontsize=8.5, labelcolor=style.INK, borderaxespad=0.2,
        labelspacing=0.25, columnspacing=1.5,
    )  # fmt: skip
    return figure


def distribution_figure(
    observable: Observable,
    binning: Binning,
    classes: Classes,
    *,
    low: float | None = None,
    high: float | None = None,
    caption: str = "",
) -> Figure:
    """Draw an observable, stacked by class, with the range that a cut keeps.

    Parameters
    ----------
    observable : Observable
        What is drawn.
    binning : Binning
        Bins.
    classes : mapping of array, shape (B,)
        Sums of weights by class.
    low, high : float, optional
        The range kept; the rest is veiled.
    caption : str
        Small print: what the numbers rest on.

    Returns
    -------
    Figure
        One panel.
    """
    live = CutFigure(observable, binning, caption=caption)
    live.update(classes, low=low, high=high)
    return live.figure


def cut_flow_figure(
    flow: CutFlow, *, caption: str = "", figure: Figure | None = None
) -> Figure:
    """Draw what every step leaves of the events.

    Parameters
    ----------
    flow : CutFlow
        The flow.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        One bar per step, with the sum of weights, its share of the start and the
        share that the step itself keeps.
    """
    n = len(flow.steps)
    height = 0.8 + 0.3 * n
    figure = style.blank(figure, (7.2, height))
    axes = figure.add_axes((0.3, 0.32 / height, 0.36, 0.3 * n / height))
    rows = np.arange(n)
    share = np.nan_to_num(flow.efficiency)
    axes.barh(rows, share, color=style.BLUE, alpha=0.45, height=0.62)
    axes.set_yticks(rows, flow.steps)
    axes.set(xlim=(0, 1), ylim=(n - 0.5, -0.5))
    axes.set_xticks([])
    style.tidy(axes)
    axes.tick_params(length=0)
    for side in ("left", "bottom"):
        axes.spines[side].set_visible(False)
    columns = (
        (1.3, "events left", [f"{x:,.0f}" for x in flow.sums]),
        (1.56, "of all", [f"{100 * x:.1f} %" for x in share]),
        (1.86, "this step", ["", *_steps(flow)]),
    )
    place = axes.get_yaxis_transform()
    for x, title, cells in columns:
        axes.text(
            x, -0.95, title, ha="right", va="center", transform=place, fontsize=8.5,
            color=style.FAINT,
        )  # fmt: skip
        for row, text in enumerate(cells):
            axes.text(
                x, row, text, ha="right", va="center", transform=place, fontsize=9
            )
    style.small_print(figure, caption)
    return figure


def _steps(flow: CutFlow) -> list[str]:
    """Share of the step before, in per cent."""
    with np.errstate(invalid="ignore", divide="ignore"):
        shares = flow.sums[1:] / flow.sums[:-1]
    return [f"{100 * x:.1f} %" if np.isfinite(x) else "" for x in shares]
