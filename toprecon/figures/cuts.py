"""The distribution behind a cut, and the cut flow."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from matplotlib.figure import Figure
from numpy.typing import NDArray

from toprecon.events import Binning, CutFlow, Observable
from toprecon.figures import style


def distribution_figure(
    observable: Observable,
    binning: Binning,
    classes: Mapping[str, NDArray[np.float64]],
    *,
    low: float | None = None,
    high: float | None = None,
    caption: str = "",
    figure: Figure | None = None,
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
        The range kept; the rest is shaded.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        One panel.
    """
    figure = style.blank(figure, (7.2, 2.7))
    axes = figure.add_axes((0.11, 0.2, 0.62, 0.7))
    base = np.zeros(len(binning))
    for name, (label, color, hatch) in style.CLASSES.items():
        if name not in classes:
            continue
        top = base + classes[name]
        axes.stairs(
            top, binning.array, baseline=base, fill=True, facecolor=color, alpha=0.55,
            hatch=hatch, edgecolor=color, label=label,
        )  # fmt: skip
        base = top
    axes.stairs(base, binning.array, color=style.INK, linewidth=1)
    edges = binning.edges
    kept = (edges[0] if low is None else low, edges[-1] if high is None else high)
    for start, stop in ((edges[0], kept[0]), (kept[1], edges[-1])):
        if stop > start:
            axes.axvspan(start, stop, color="#ffffff", alpha=0.72, linewidth=0)
            axes.axvspan(start, stop, color="#d9dde1", alpha=0.45, linewidth=0)
    for limit in (low, high):
        if limit is not None and edges[0] <= limit <= edges[-1]:
            axes.axvline(limit, color=style.INK, linewidth=1.4)
    axes.set(xlim=(edges[0], edges[-1]), ylim=(0, 1.08 * max(base.max(), 1e-9)))
    axes.set_xlabel(observable.axis_label)
    axes.set_ylabel("sum of weights")
    style.tidy(axes)
    axes.legend(
        loc="upper left", bbox_to_anchor=(1.01, 1.02), frameon=False, fontsize=9
    )
    style.small_print(figure, caption)
    return figure


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
        One bar per step, with count and per cent.
    """
    figure = style.blank(figure, (7.2, 0.9 + 0.34 * len(flow.steps)))
    axes = figure.add_axes((0.32, 0.12, 0.45, 0.84))
    rows = np.arange(len(flow.steps))
    share = np.nan_to_num(flow.efficiency)
    axes.barh(rows, share, color="#0072b2", alpha=0.45, height=0.62)
    axes.set_yticks(rows, flow.steps)
    axes.invert_yaxis()
    axes.set_xlim(0, 1)
    axes.set_xticks([])
    for row, (total, part) in enumerate(zip(flow.sums, share, strict=True)):
        axes.text(
            1.02, row, f"{total:,.0f}   {100 * part:.1f} %", va="center", fontsize=9,
            transform=axes.get_yaxis_transform(),
        )  # fmt: skip
    style.tidy(axes)
    style.small_print(figure, caption)
    return figure
