"""A scan of cuts: what a cut costs, what it cures, and the point to take."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.figure import Figure

from toprecon.asymmetry import ScanPoint, ScanResult
from toprecon.figures import style

COSTS = LinearSegmentedColormap.from_list("costs", ["#00304d", "#0072b2", "#f2f5f7"])


def scan_figure(
    result: ScanResult,
    *,
    labels: tuple[str, ...] | None = None,
    best: ScanPoint | None = None,
    caption: str = "",
    figure: Figure | None = None,
) -> Figure:
    """Draw a scan of one or two cuts.

    Parameters
    ----------
    result : ScanResult
        The scan.
    labels : tuple of str, optional
        Texts of the axes; the names of the observables if absent.
    best : ScanPoint, optional
        Point to mark.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        Left: bias against efficiency, one point per cut, those that no other beats
        joined. Right: total error against the cut, or over the plane of both.
    """
    figure = style.blank(figure, (7.2, 3.5))
    left = figure.add_axes((0.105, 0.2, 0.38, 0.68))
    names = labels or tuple(axis.observable for axis in result.axes)
    _front(left, result, best)
    if len(result.axes) == 1:
        right = figure.add_axes((0.6, 0.2, 0.375, 0.68))
        _curve(right, result, names[0], best)
    else:
        right = figure.add_axes((0.6, 0.2, 0.29, 0.68))
        _plane(figure, right, result, names, best)
    for axes in (left, right):
        style.tidy(axes)
    style.small_print(figure, caption)
    return figure


def _front(axes: Any, result: ScanResult, best: ScanPoint | None) -> None:
    """Size of the bias against the efficiency."""
    values, considered = result.everything, result.is_considered
    axes.plot(
        values.efficiency[considered], np.abs(values.bias[considered]), ".",
        color=style.PALE, markersize=4, zorder=1,
    )  # fmt: skip
    front = result.is_on_front
    order = np.argsort(values.efficiency[front])
    x = values.efficiency[front][order]
    y = np.abs(values.bias[front])[order]
    error = values.bias_error[front][order]
    axes.fill_between(
        x,
        np.maximum(y - error, 0),
        y + error,
        color=style.BLUE,
        alpha=0.15,
        linewidth=0,
    )
    axes.plot(x, y, color=style.BLUE, marker=".", linewidth=1.3, label="not beaten")
    if best is not None:
        axes.errorbar(
            best.efficiency.value, abs(best.bias.value), best.bias.error,
            best.efficiency.error, fmt="D", color=style.ORANGE, markersize=6, zorder=4,
            label="chosen on half A, shown for B",
        )  # fmt: skip
    axes.set_ylim(bottom=0)
    axes.set_xlabel("efficiency")
    axes.set_ylabel(f"|bias| of {style.A_FB}")
    axes.legend(
        loc="lower left", bbox_to_anchor=(-0.04, 1.0), ncols=2, frameon=False,
        fontsize=8.5, labelcolor=style.INK, columnspacing=1.0, handlelength=1.4,
    )  # fmt: skip


def _curve(axes: Any, result: ScanResult, label: str, best: ScanPoint | None) -> None:
    """Total error, and what it is made of, against the cut."""
    values, points = result.everything, result.axes[0].points
    x = np.arange(len(points))
    bias = np.sqrt(np.clip(values.squared_bias[:, 0], 0, None))
    axes.plot(x, values.total_error[:, 0], color=style.INK, label="total error")
    axes.plot(x, values.expected_error[:, 0], label="statistical", **style.SIGNAL_ONLY)
    axes.plot(x, bias, color=style.ORANGE, linestyle="-.", label="bias")
    if best is not None:
        axes.axvline(best.index[0], color=style.ORANGE, linewidth=1)
    considered = values.total_error[result.is_considered]
    highest = float(np.nanmax(considered, initial=0)) or 1.0
    axes.set_ylim(0, 1.35 * highest)
    _label_points(axes.xaxis, points)
    axes.set_xlabel(f"cut on {label}")
    axes.legend(
        loc="upper right", framealpha=1, edgecolor="none", facecolor=style.PAPER,
        fontsize=8.5, labelcolor=style.INK,
    )  # fmt: skip
    style.heading(axes, f"error of {style.A_FB}")


def _plane(
    figure: Figure,
    axes: Any,
    result: ScanResult,
    names: tuple[str, ...],
    best: ScanPoint | None,
) -> None:
    """Total error over both cuts."""
    sizes = [len(axis.points) for axis in result.axes]
    error = np.where(result.is_considered, result.everything.total_error, np.nan)
    low = float(np.nanmin(error, initial=np.inf))
    mesh = axes.pcolormesh(
        np.arange(sizes[0] + 1) - 0.5, np.arange(sizes[1] + 1) - 0.5, error.T,
        cmap=COSTS, vmin=low, vmax=3 * low,
    )  # fmt: skip
    bar = figure.colorbar(mesh, cax=figure.add_axes((0.905, 0.2, 0.015, 0.68)))
    bar.ax.tick_params(labelsize=8, color=style.FAINT)
    bar.outline.set_visible(False)
    if best is not None:
        axes.plot(*best.index, "D", color=style.ORANGE, markersize=6)
    for axis, scanned in zip((axes.xaxis, axes.yaxis), result.axes, strict=True):
        _label_points(axis, scanned.points)
    axes.set_xlabel(f"cut on {names[0]}")
    axes.set_ylabel(f"cut on {names[1]}", labelpad=2)
    style.heading(axes, f"total error of {style.A_FB}")


def _label_points(axis: Any, points: tuple[float, ...]) -> None:
    """Label some of the points, which are spread by events and not by value."""
    marked = np.unique(np.linspace(0, len(points) - 1, 5).round().astype(int))
    axis.set_ticks(marked, [_short(points[k]) for k in marked])


def _short(value: float) -> str:
    """Return a number in few characters."""
    return f"{value:.3g}" if abs(value) < 1000 else f"{value:.0f}"
