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
    "wrong_w": "wrong\nW jets",
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
    figure = style.blank(figure, (7.2, 3.3))
    axes = figure.add_axes((0.105, 0.235, 0.87, 0.65))
    steps = [s for s in budget.steps if s.shift.value or s.shift.error > 1e-9]
    level = budget.generated.value
    axes.axhline(level, color=style.PALE, linewidth=1, zorder=0)
    axes.errorbar(
        0, level, budget.generated.error, fmt="o", color=style.SELECTED["color"],
        markersize=6,
    )  # fmt: skip
    for x, step in enumerate(steps, start=1):
        after = level + step.shift.value
        color, hatch = (
            (style.ORANGE, "") if step.shift.value < 0 else (style.BLUE, "//")
        )
        axes.plot(
            [x - 1 + 0.3 * (x > 1), x + 0.3], [level, level], color=style.FAINT,
            linewidth=0.8,
        )  # fmt: skip
        axes.bar(
            x, step.shift.value, bottom=level, width=0.6, facecolor=color,
            edgecolor=color, hatch=hatch, linewidth=0, alpha=0.5,
        )  # fmt: skip
        axes.errorbar(x, after, step.shift.error, fmt="none", ecolor=style.INK)
        axes.annotate(
            style.signed(step.shift), (x, max(level, after + step.shift.error)),
            (0, 4), textcoords="offset points", ha="center", va="bottom", fontsize=9,
        )  # fmt: skip
        level = after
    last = len(steps) + 1
    axes.plot([last - 0.7, last], [level, level], color=style.FAINT, linewidth=0.8)
    axes.errorbar(
        last, budget.reconstructed.value, budget.reconstructed.error, fmt="D",
        color=style.RECONSTRUCTED["color"], markersize=6,
    )  # fmt: skip
    names = ["generated", *(NAMES[s.name] for s in steps), "recon-\nstructed"]
    axes.set_xticks(np.arange(last + 1), names)
    axes.set_xlim(-0.5, last + 0.5)
    axes.set_ylabel(style.A_FB)
    axes.margins(y=0.16)
    style.tidy(axes)
    axes.tick_params(axis="x", length=0, labelsize=8.5 if last < 8 else 7.2)
    style.heading(
        axes, f"what changes {style.A_FB}, step by step; in all "
        f"{style.pm(budget.total, sign=True)}",
    )  # fmt: skip
    style.small_print(figure, caption)
    return figure
