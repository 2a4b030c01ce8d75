"""The distortion budget as a staircase from the generated to the reconstructed A_FB."""

from __future__ import annotations

import numpy as np
from matplotlib.figure import Figure

from toprecon.asymmetry import DistortionBudget
from toprecon.figures import style

NAMES = {
    "acceptance": "acceptance",
    "resolution": "resolution",
    "wrong_b": "wrong b",
    "wrong_w": "wrong W jets",
    "unmatched": "unmatched",
    "charge": "charge",
    "outside": "outside\nphase space",
    "background": "background",
}


def budget_figure(
    budget: DistortionBudget, *, caption: str = "", figure: Figure | None = None
) -> Figure:
    """Draw which cause shifts A_FB by how much.

    Parameters
    ----------
    budget : DistortionBudget
        The budget.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        From left to right: A_FB generated (all signal), one step per cause with its
        paired error, A_FB reconstructed (all selected). Steps without any effect are
        left out.
    """
    figure = style.blank(figure, (7.2, 3.4))
    axes = figure.add_axes((0.11, 0.24, 0.86, 0.64))
    steps = [s for s in budget.steps if s.shift.value or s.shift.error > 1e-9]
    level = budget.generated.value
    axes.errorbar(
        0, level, budget.generated.error, fmt="o", color=style.INK, markersize=6
    )
    for x, step in enumerate(steps, start=1):
        after = level + step.shift.value
        color = "#d55e00" if step.shift.value < 0 else "#0072b2"
        axes.plot([x - 1, x + 0.3], [level, level], color=style.FAINT, linewidth=0.8)
        axes.bar(x, step.shift.value, bottom=level, width=0.6, color=color, alpha=0.5)
        axes.errorbar(x, after, step.shift.error, fmt="none", ecolor=style.INK)
        axes.text(
            x, max(level, after, after + step.shift.error) + 0.002, f"{step.shift.value:+.3f}", ha="center",
            va="bottom", fontsize=9,
        )  # fmt: skip
        level = after
    last = len(steps) + 1
    axes.plot([last - 1, last], [level, level], color=style.FAINT, linewidth=0.8)
    axes.errorbar(
        last, budget.reconstructed.value, budget.reconstructed.error, fmt="D",
        color=style.RECONSTRUCTED["color"], markersize=6,
    )  # fmt: skip
    names = ["generated", *(NAMES[s.name] for s in steps), "recon-\nstructed"]
    axes.set_xticks(np.arange(last + 1), names)
    axes.set_ylabel("A_FB")
    axes.margins(y=0.18)
    style.tidy(axes)
    style.heading(
        axes, f"shift of A_FB by cause; total {budget.total.value:+.4f}"
        f" ± {budget.total.error:.4f}"
    )  # fmt: skip
    style.small_print(figure, caption)
    return figure
