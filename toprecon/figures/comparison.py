"""Two reconstructions of the same events, side by side."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.figure import Figure

from toprecon.asymmetry import Comparison
from toprecon.figures import style

NAMES = {
    "efficiency": "efficiency",
    "generated_selected": f"{style.A_FB} generated, selected",
    "reconstructed": f"{style.A_FB} reconstructed",
    "shift": "shift by reconstruction",
    "total_shift": "shift in all",
}

COLUMNS = (0.345, 0.53, 0.705)
"""Places of the columns of numbers."""

LARGEST = 6.0
"""Differences of more errors are drawn at the edge, as an arrow."""


def comparison_figure(
    comparison: Comparison,
    *,
    names: tuple[str, str] = ("first", "second"),
    caption: str = "",
    figure: Figure | None = None,
) -> Figure:
    """Draw what changes between two reconstructions.

    Parameters
    ----------
    comparison : Comparison
        The comparison.
    names : tuple of str
        What the two are called.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        One row per quantity: its value in both, and the difference with its paired
        error, drawn in units of that error.
    """
    figure = style.blank(figure, (7.2, 2.9))
    axes = figure.add_axes((0.82, 0.2, 0.165, 0.6))
    for x, title in zip(COLUMNS, names, strict=False):
        _cell(figure, x, -0.9, title, color=style.FAINT)
    _cell(figure, COLUMNS[2], -0.9, "difference", color=style.FAINT)
    for row, (key, label) in enumerate(NAMES.items()):
        item = comparison[key]
        _cell(figure, 0.012, row, label, ha="left")
        cells = (
            style.pm(item.first),
            style.pm(item.second),
            style.pm(item.difference, sign=True),
        )
        for x, cell in zip(COLUMNS, cells, strict=True):
            _cell(figure, x, row, cell)
    pulls = np.array([comparison[key].significance for key in NAMES])
    shown = np.clip(pulls, -LARGEST, LARGEST)
    axes.axvspan(-1, 1, color=style.PALE, alpha=0.5, linewidth=0)
    axes.axvline(0, color=style.FAINT, linewidth=0.8)
    for row, (pull, place) in enumerate(zip(pulls, shown, strict=True)):
        beyond = {-1: "<", 1: ">"}[int(np.sign(pull))] if pull != place else "D"
        axes.plot(place, row, beyond, color=style.ORANGE, markersize=6)
    axes.set(xlim=(-LARGEST - 1, LARGEST + 1), ylim=(len(NAMES) - 0.5, -0.5))
    axes.set_yticks([])
    axes.set_xlabel("difference / error")
    style.tidy(axes)
    axes.spines["left"].set_visible(False)
    style.small_print(figure, caption)
    return figure


def _cell(figure: Figure, x: float, row: float, text: str, **look: Any) -> None:
    """Write into a row of the table."""
    y = 0.8 - 0.6 * (row + 0.5) / len(NAMES)
    look = {"ha": "center", "va": "center", "fontsize": 9, "color": style.INK, **look}
    figure.text(x, y, text, **look)
