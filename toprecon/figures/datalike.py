"""What data would show: an observable by process, and the tail of the pairing score."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from matplotlib.figure import Figure
from numpy.typing import ArrayLike, NDArray

from toprecon.events import Binning, Observable
from toprecon.figures import style

FloatArray = NDArray[np.float64]

LOOKS = (
    ("#8dbbdc", ""),
    ("#c6dbef", "////"),
    ("#dfe9f3", "...."),
    ("#f0b67f", "\\\\\\\\"),
    ("#e8d08b", "xx"),
    ("#c9b3d1", "++"),
    ("#b9c9b0", "oo"),
    ("#c4c7ca", "--"),
)
"""Fill and hatching of the parts of a stack, from below."""

TAIL_LOOKS = {
    "matched": ("matched", style.GREEN, ""),
    "unmatched": style.CLASSES["unmatched"],
    "other": ("other", "#999999", "oo"),
}


def data_like_figure(
    observable: Observable,
    binning: Binning,
    stack: Mapping[str, ArrayLike],
    variances: Mapping[str, ArrayLike],
    *,
    outside: float = 0.0,
    is_expected: bool = False,
    low: float | None = None,
    high: float | None = None,
    caption: str = "",
    figure: Figure | None = None,
) -> Figure:
    """Draw an observable of the selected events, stacked by process.

    Parameters
    ----------
    observable : Observable
        What is drawn.
    binning : Binning
        Bins.
    stack, variances : mapping of array, shape (B,)
        Sums of weights and of their squares, by process; the smallest are at the
        bottom.
    outside : float
        Sum of what lies outside the bins, said in the legend.
    is_expected : bool
        Whether the sums are events at a luminosity; points then show them with the
        errors that data would have.
    low, high : float, optional
        The cut on the observable, which is not applied, as lines.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        The dark band is the statistical error of the simulation. Below: relative errors
        of the simulation and of the data.
    """
    figure = style.blank(figure, (7.2, 3.9))
    axes = figure.add_axes((0.115, 0.365, 0.6, 0.575))
    below = figure.add_axes((0.115, 0.145, 0.6, 0.16))
    edges, widths = binning.array, binning.widths
    counts = {n: np.asarray(v, dtype=np.float64) for n, v in stack.items()}
    names = sorted(counts, key=lambda n: counts[n].sum())
    base = np.zeros(len(binning))
    for place, name in enumerate(names):
        color, hatch = LOOKS[(len(names) - 1 - place) % len(LOOKS)]
        top = base + counts[name]
        axes.stairs(
            top, edges, baseline=base, fill=True, facecolor=color, hatch=hatch,
            edgecolor="#ffffff", linewidth=0, label=name,
        )  # fmt: skip
        base = top
    axes.stairs(base, edges, color=style.INK, linewidth=1.0)
    error = np.sqrt(np.sum([np.asarray(v) for v in variances.values()], axis=0))
    _band(axes, edges, base - error, base + error, "error of the simulation")
    with np.errstate(invalid="ignore", divide="ignore"):
        relative = np.where(base > 0, error / base, np.nan)
        _band(below, edges, -relative, relative, "")
        if is_expected:
            of_data = np.sqrt(np.maximum(base, 0.0))
            look: dict[str, Any] = {"fmt": "o", "color": style.INK, "markersize": 3}
            axes.errorbar(
                binning.centres, base, yerr=of_data, label="data expected", **look
            )
            below.errorbar(
                binning.centres, np.zeros(len(base)),
                yerr=np.where(base > 0, of_data / base, np.nan), **look,
            )  # fmt: skip
    highest = float(np.nanmax(relative, initial=0.02))
    below.set(ylim=(-1.25 * highest, 1.25 * highest), ylabel="relative\nerror")
    for one in (axes, below):
        for limit in (low, high):
            if limit is not None:
                one.axvline(limit, color=style.ORANGE, linewidth=1.5)
        one.set_xlim(edges[0], edges[-1])
        style.tidy(one)
    axes.set_ylim(0, 1.12 * float((base + error).max(initial=1e-9)))
    axes.tick_params(labelbottom=False)
    unit = "expected events" if is_expected else "sum of weights"
    same = np.allclose(widths, widths[0])
    axes.set_ylabel(f"{unit} per {widths[0]:.3g}" if same else f"{unit} per bin")
    below.set_xlabel(observable.axis_label)
    if outside:
        share = outside / (outside + base.sum())
        axes.plot([], [], " ", label=f"({100 * share:.1f} % outside)")
    handles, labels = axes.get_legend_handles_labels()
    axes.legend(
        handles[::-1], labels[::-1], loc="upper left", bbox_to_anchor=(1.02, 1.03),
        frameon=False, fontsize=9, labelcolor=style.INK,
    )  # fmt: skip
    style.small_print(figure, caption)
    return figure


def tail_figure(
    observable: Observable,
    binning: Binning,
    data: ArrayLike,
    parts: Mapping[str, ArrayLike],
    *,
    caption: str = "",
    figure: Figure | None = None,
) -> Figure:
    """Draw the pairing score with the templates fitted to it.

    Parameters
    ----------
    observable : Observable
        What was fitted.
    binning : Binning
        Bins of the fit, of about equal counts.
    data : array, shape (B,)
        What was fitted.
    parts : mapping of array, shape (B,)
        ``matched``, ``unmatched`` and ``other``, scaled to the fit.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        One column per bin, named by its lower edge: the tail would fill the axis.
    """
    figure = style.blank(figure, (7.2, 2.9))
    axes = figure.add_axes((0.115, 0.26, 0.6, 0.68))
    n = len(binning)
    places = np.arange(n + 1, dtype=np.float64)
    base = np.zeros(n)
    for name, (label, color, hatch) in TAIL_LOOKS.items():
        if name not in parts:
            continue
        top = base + np.asarray(parts[name], dtype=np.float64)
        axes.stairs(
            top, places, baseline=base, fill=True, facecolor=color, alpha=0.55,
            hatch=hatch, edgecolor=color, linewidth=0, label=label,
        )  # fmt: skip
        base = top
    axes.plot(
        places[:-1] + 0.5, np.asarray(data), "o", color=style.INK, markersize=4,
        label="events fitted",
    )  # fmt: skip
    step = max(1, n // 6)
    shown = np.arange(0, n, step)
    axes.set_xticks(shown, [f"{binning.edges[k]:.2g}" for k in shown])
    axes.set(xlim=(0, n), ylim=(0, 1.12 * max(float(np.max(data)), float(base.max()))))
    axes.set_xlabel(
        f"{observable.axis_label}: lower edges of bins of about equal counts"
    )
    axes.set_ylabel("sum of weights per bin")
    style.tidy(axes)
    handles, labels = axes.get_legend_handles_labels()
    axes.legend(
        handles[::-1], labels[::-1], loc="upper left", bbox_to_anchor=(1.02, 1.03),
        frameon=False, fontsize=9, labelcolor=style.INK,
    )  # fmt: skip
    style.small_print(figure, caption)
    return figure


def _band(
    axes: Any, edges: FloatArray, low: FloatArray, high: FloatArray, label: str
) -> None:
    """Draw an error band."""
    axes.stairs(
        high, edges, baseline=low, fill=True, facecolor=style.INK, alpha=0.28,
        linewidth=0, label=label or None,
    )  # fmt: skip
