"""The production angle: generated against reconstructed, with their ratio."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.figure import Figure

from toprecon.asymmetry import AsymmetryResult
from toprecon.figures import style

GROUP = 2
"""Fine bins joined: 20 bins of cos(theta)."""


def angle_figure(
    result: AsymmetryResult,
    *,
    caption: str = "",
    expected: bool = False,
    figure: Figure | None = None,
) -> Figure:
    """Draw cos(theta) of the top, generated and reconstructed.

    Parameters
    ----------
    result : AsymmetryResult
        For one setting of the beams.
    caption : str
        Small print: what the numbers rest on.
    expected : bool
        Whether the sums are expected events.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        Above: generated and reconstructed angle of the selected events and, scaled
        to the same area, the generated angle of all signal events. Below: each
        divided by the generated angle of the selected events, with paired-sample
        errors left out (the two share events), so bars show the larger one.
    """
    figure = style.blank(figure, (7.2, 4.8))
    grid = figure.add_gridspec(
        2, 1, height_ratios=(2.6, 1), hspace=0.07, left=0.11, right=0.98,
        bottom=0.13, top=0.84,
    )  # fmt: skip
    upper = figure.add_subplot(grid[0])
    lower = figure.add_subplot(grid[1], sharex=upper)
    spectra = result.spectra
    edges = np.linspace(-1, 1, 40 // GROUP + 1)
    selected, _ = spectra.rebinned("generated_selected", GROUP)
    everything, _ = spectra.rebinned("generated", GROUP)
    reco, reco_v = spectra.rebinned("reconstructed", GROUP)
    signal, _ = spectra.rebinned("reconstructed_signal", GROUP)
    scale = selected.sum() / everything.sum() if everything.sum() else np.nan
    lines = (
        (
            everything * scale,
            style.GENERATED,
            f"generated, all (same area): A_FB {style.pm(result.generated)}",
        ),
        (
            selected,
            style.SELECTED,
            f"generated, selected: A_FB {style.pm(result.generated_selected)}",
        ),
        (
            reco,
            style.RECONSTRUCTED,
            f"reconstructed: A_FB {style.pm(result.reconstructed)}",
        ),
    )
    for values, look, label in lines:
        upper.stairs(values, edges, label=label, **look)
    if signal.sum() < reco.sum():
        upper.stairs(
            signal, edges, color=style.RECONSTRUCTED["color"], linestyle=":",
            label="reconstructed, signal only: A_FB "
            f"{style.pm(result.reconstructed_signal)}",
        )  # fmt: skip
    _bars(upper, edges, reco, reco_v, style.RECONSTRUCTED["color"])
    upper.set_ylim(0, 1.12 * max(1e-9, *(v.max() for v, _, _ in lines)))
    upper.set_ylabel("expected events" if expected else "sum of weights")
    upper.tick_params(labelbottom=False)
    handles, labels = upper.get_legend_handles_labels()
    figure.legend(
        handles, labels, loc="upper left", bbox_to_anchor=(0.1, 1.0), frameon=False,
        fontsize=9, labelcolor=style.INK,
    )  # fmt: skip
    with np.errstate(invalid="ignore", divide="ignore"):
        lower.axhline(1.0, **style.SELECTED)
        lower.stairs(
            everything * scale / selected, edges, baseline=None, **style.GENERATED
        )
        ratio = reco / selected
        lower.stairs(ratio, edges, baseline=None, **style.RECONSTRUCTED)
        error = np.sqrt(reco_v) / selected
        _bars(lower, edges, ratio, error**2, style.RECONSTRUCTED["color"])
        span = float(np.nanmax(np.abs(np.where(selected > 0, ratio, 1) - 1), initial=0))
    half = next((h for h in (0.15, 0.3, 0.6, 1.0) if h > 1.1 * span), 1.0)
    lower.set_ylim(1 - half, 1 + half)
    lower.set_xlim(-1, 1)
    lower.set_ylabel("to generated,\nselected", fontsize=9)
    lower.set_xlabel("cos θ of the top to the electron beam")
    for axes in (upper, lower):
        style.tidy(axes)
    lower.yaxis.label.set_fontsize(9)
    style.small_print(figure, caption)
    return figure


def _bars(axes: Any, edges: Any, values: Any, variances: Any, color: Any) -> None:
    """Statistical errors in the middle of the bins."""
    centres = 0.5 * (edges[1:] + edges[:-1])
    axes.errorbar(
        centres, values, np.sqrt(variances), fmt="none", ecolor=color, elinewidth=1
    )
