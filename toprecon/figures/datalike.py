"""What data would show: an observable by process, and the tail of the pairing score."""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from typing import Any

import numpy as np
from matplotlib.figure import Figure
from numpy.typing import ArrayLike, NDArray

from toprecon.events import Binning, Observable
from toprecon.figures import style

FloatArray = NDArray[np.float64]

LOOKS = (
    ("#9cc6e4", ""),
    ("#0072b2", "////"),
    ("#56b4e9", "...."),
    ("#e69f00", "\\\\\\\\"),
    ("#d55e00", "xxxx"),
    ("#009e73", "++++"),
    ("#cc79a7", "oo"),
    ("#7b838b", "----"),
)
"""Fill and hatching of processes, in the order in which they are given."""

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
        bottom, and a process keeps its colour.
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
    figure = style.blank(figure, (7.2, 4.0))
    axes = figure.add_axes((0.115, 0.365, 0.6, 0.575))
    below = figure.add_axes((0.115, 0.145, 0.6, 0.16))
    edges, widths = binning.array, binning.widths
    counts = {n: np.asarray(v, dtype=np.float64) for n, v in stack.items()}
    names = sorted(counts, key=lambda n: counts[n].sum())
    base = np.zeros(len(binning))
    looks = dict(zip(counts, itertools.cycle(LOOKS), strict=False))
    for name in names:
        color, hatch = looks[name]
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
    known = relative[np.isfinite(relative)]
    # one bin with a heavy event must not flatten the others
    highest = min(known.max(), 3 * float(np.median(known))) if len(known) else 0.02
    below.set(ylim=(-1.25 * highest, 1.25 * highest), ylabel="relative\nerror")
    limits = [limit for limit in (low, high) if limit is not None]
    for one in (axes, below):
        for k, limit in enumerate(limits):
            label = "cut, not applied here" if one is axes and k == 0 else None
            one.axvline(limit, color=style.ORANGE, linewidth=1.5, label=label)
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
    style.legend_beside(axes, upside_down=True)
    style.small_print(figure, caption)
    return figure


def tail_figure(
    observable: Observable,
    binning: Binning,
    data: ArrayLike,
    parts: Mapping[str, ArrayLike],
    *,
    errors: ArrayLike | None = None,
    place: float | None = None,
    is_expected: bool = False,
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
    errors : array, shape (B,), optional
        Errors of the bins in the fit.
    place : float, optional
        Where the tail begins, as a line.
    is_expected : bool
        Whether the sums are events at a luminosity.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        One column per bin, between edges that are written below: on an axis of the
        score the tail would take all the room. Below: what was fitted less the fit, in
        errors.
    """
    figure = style.blank(figure, (7.2, 4.0))
    axes = figure.add_axes((0.115, 0.415, 0.6, 0.535))
    below = figure.add_axes((0.115, 0.215, 0.6, 0.15))
    n = len(binning)
    places = np.arange(n + 1, dtype=np.float64)
    middle = places[:-1] + 0.5
    seen = np.asarray(data, dtype=np.float64)
    error = np.zeros(n) if errors is None else np.asarray(errors, dtype=np.float64)
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
    look: dict[str, Any] = {"fmt": "o", "color": style.INK, "markersize": 3.5}
    axes.errorbar(middle, seen, yerr=error, label="events fitted", **look)
    with np.errstate(invalid="ignore", divide="ignore"):
        off = np.where(error > 0, (seen - base) / error, np.nan)
    below.axhspan(-1, 1, color=style.PALE, linewidth=0)
    below.axhline(0, color=style.FAINT, linewidth=0.8)
    below.plot(middle, off, "o", color=style.INK, markersize=3.5)
    reach = max(2.5, 1.2 * float(np.nanmax(np.abs(off), initial=0.0)))
    below.set(ylim=(-reach, reach), ylabel="pull")
    if place is not None:
        for k, one in enumerate((axes, below)):
            one.axvline(
                float(np.interp(place, binning.array, places)), color=style.ORANGE,
                linewidth=1.5, label=None if k else f"tail from {place:.3g}",
            )  # fmt: skip
    shown = np.arange(0, n, max(1, -(-n // 10)))
    below.set_xticks(shown, [_edge(binning.edges[k]) for k in shown])
    axes.set_xticks(shown)
    axes.tick_params(labelbottom=False)
    highest = max(float((seen + error).max(initial=0.0)), float(base.max(initial=1e-9)))
    axes.set(ylim=(0, 1.12 * highest))
    axes.set_ylabel(f"{'expected events' if is_expected else 'sum of weights'} per bin")
    below.set_xlabel(f"{observable.axis_label}, edges of bins of about equal counts")
    for one in (axes, below):
        one.set_xlim(0, n)
        style.tidy(one)
    style.legend_beside(axes, upside_down=True)
    style.small_print(figure, caption)
    return figure


def _edge(value: float) -> str:
    """Write an edge in two digits, without an exponent."""
    return f"{value:.0f}" if value >= 10 else f"{value:.1f}"


def _band(
    axes: Any, edges: FloatArray, low: FloatArray, high: FloatArray, label: str
) -> None:
    """Draw an error band."""
    axes.stairs(
        high, edges, baseline=low, fill=True, facecolor=style.INK, alpha=0.28,
        linewidth=0, label=label or None,
    )  # fmt: skip
