"""The migration matrix with efficiency, stability and purity beside it."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.figure import Figure

from toprecon.figures import style
from toprecon.migration import MigrationMatrix

SHADES = LinearSegmentedColormap.from_list(
    "shades", ["#ffffff", "#cfe3ef", "#6aaed1", "#0072b2", "#00304d"]
)
MOST_LABELS = 14
"""Bins beyond which the numbers in the cells would be too small to read."""


def matrix_figure(
    matrix: MigrationMatrix, *, caption: str = "", figure: Figure | None = None
) -> Figure:
    """Draw where the events of every generated bin are reconstructed.

    Parameters
    ----------
    matrix : MigrationMatrix
        The matrix.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        Cells: per cent of the selected events of a generated bin; rows add up to 100.
        Beside: efficiency of every generated bin. Below: purity (share of a
        reconstructed bin that was generated there) and stability (share of a
        generated bin that stays there), for equal binnings.
    """
    figure = style.blank(figure, (7.2, 5.6))
    grid = figure.add_gridspec(
        2, 2, width_ratios=(5, 1.15), height_ratios=(5, 1.0), left=0.11, right=0.97,
        bottom=0.13, top=0.92, wspace=0.05, hspace=0.06,
    )  # fmt: skip
    axes = figure.add_subplot(grid[0, 0])
    shares = matrix.migration
    true, reco = matrix.true_binning.array, matrix.reco_binning.array
    axes.pcolormesh(reco, true, np.nan_to_num(shares), cmap=SHADES, vmin=0, vmax=1)
    if max(shares.shape) <= MOST_LABELS:
        _numbers(axes, matrix)
    axes.set(xlim=(reco[0], reco[-1]), ylim=(true[0], true[-1]))
    axes.set_ylabel("generated cos θ")
    style.heading(axes, "where the selected events of a generated bin land [%]")
    beside = figure.add_subplot(grid[0, 1], sharey=axes)
    beside.stairs(
        100 * matrix.efficiency, true, orientation="horizontal", color=style.BLUE,
        fill=True, alpha=0.35,
    )  # fmt: skip
    beside.set(xlim=(0, 100), ylim=(true[0], true[-1]))
    style.heading(beside, "efficiency [%]")
    beside.tick_params(labelleft=False)
    below = figure.add_subplot(grid[1, 0], sharex=axes)
    if matrix.has_equal_bins:
        purity, stability = 100 * matrix.purity, 100 * matrix.stability
        below.stairs(purity, reco, baseline=None, label="purity", **style.SIGNAL_ONLY)
        below.stairs(
            stability, reco, baseline=None, label="stability", **style.SELECTED
        )
        below.set_ylabel("[%]")
        below.set_ylim(0, 100)
        below.legend(
            loc="center left", bbox_to_anchor=(1.02, 0.5), frameon=False, fontsize=9,
            labelcolor=style.INK,
        )  # fmt: skip
    else:
        below.stairs(matrix.counts.sum(axis=0), reco, color=style.BLUE)
        below.set_ylabel("selected")
    below.set_xlabel("reconstructed cos θ")
    axes.tick_params(labelbottom=False)
    for item in (axes, beside, below):
        style.tidy(item)
    style.small_print(figure, caption)
    return figure


def _numbers(axes: Any, matrix: MigrationMatrix) -> None:
    """Write per cent into the cells, in a colour that can be read."""
    shares = matrix.migration
    for t, y in enumerate(matrix.true_binning.centres):
        for r, x in enumerate(matrix.reco_binning.centres):
            share = shares[t, r]
            if not np.isfinite(share) or share < 0.0005:
                continue
            text = f"{100 * share:.0f}" if share >= 0.0995 else f"{100 * share:.1f}"
            axes.text(
                x, y, text, ha="center", va="center", fontsize=8.5,
                color=style.readable_on(SHADES(share)),
            )  # fmt: skip
