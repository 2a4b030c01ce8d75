"""A closure test: one half of the events corrected with the response of the other."""

from __future__ import annotations

import numpy as np
from matplotlib.figure import Figure

from toprecon.figures import style
from toprecon.migration import ClosureResult


def closure_figure(
    result: ClosureResult, *, caption: str = "", figure: Figure | None = None
) -> Figure:
    """Draw a corrected spectrum over the generated one of the same events.

    Parameters
    ----------
    result : ClosureResult
        The test.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        Above: both spectra. Below: residuals over their paired errors, which should
        scatter by 1.
    """
    figure = style.blank(figure, (7.2, 4.6))
    grid = figure.add_gridspec(
        2, 1, height_ratios=(2.2, 1), hspace=0.1, left=0.105, right=0.972, bottom=0.15,
        top=0.9,
    )  # fmt: skip
    upper = figure.add_subplot(grid[0])
    lower = figure.add_subplot(grid[1], sharex=upper)
    binning = result.unfolded.binning
    edges, centres = binning.array, binning.centres
    upper.stairs(
        result.generated, edges, baseline=None, label="generated", **style.SELECTED
    )
    upper.errorbar(
        centres, result.unfolded.values, np.sqrt(np.diagonal(result.unfolded.covariance)),
        fmt="D", color=style.ORANGE, markersize=4, label="corrected",
    )  # fmt: skip
    upper.set_ylim(bottom=0)
    upper.set_ylabel("sum of weights, half B")
    upper.tick_params(labelbottom=False)
    upper.legend(loc="upper left", frameon=False, fontsize=9, labelcolor=style.INK)
    lower.axhspan(-1, 1, color=style.PALE, alpha=0.5, linewidth=0)
    lower.axhline(0, color=style.FAINT, linewidth=0.8)
    lower.plot(centres, result.pulls, "D", color=style.ORANGE, markersize=4)
    limit = max(3.0, 1.1 * float(np.nanmax(np.abs(result.pulls), initial=0)))
    lower.set(xlim=(edges[0], edges[-1]), ylim=(-limit, limit))
    lower.set_ylabel("residual / error")
    lower.set_xlabel("generated cos θ")
    for axes in (upper, lower):
        style.tidy(axes)
    lower.yaxis.label.set_fontsize(9)
    style.heading(
        upper,
        f"{style.A_FB} corrected minus generated "
        f"{style.pm(result.asymmetry_residual, sign=True)};  "
        f"χ² {result.chi2:.1f} for {result.degrees} bins",
    )
    style.small_print(figure, caption)
    return figure
