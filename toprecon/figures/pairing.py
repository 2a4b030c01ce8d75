"""Pairing classes: how many, and what each does to A_FB."""

from __future__ import annotations

from matplotlib.figure import Figure

from toprecon.asymmetry import AsymmetryResult
from toprecon.figures import style


def class_figure(
    result: AsymmetryResult, *, caption: str = "", figure: Figure | None = None
) -> Figure:
    """Draw the share of every pairing class and its A_FB.

    Parameters
    ----------
    result : AsymmetryResult
        For one setting of the beams.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        Left: share of the selected signal. Right: A_FB of the same events, generated
        (open) and reconstructed (filled), with their errors.
    """
    figure = style.blank(figure, (7.2, 2.8))
    left = figure.add_axes((0.18, 0.2, 0.3, 0.66))
    right = figure.add_axes((0.56, 0.2, 0.41, 0.66))
    classes = [c for n in style.CLASSES if (c := result.by_class.get(n)) is not None]
    rows = list(range(len(classes)))
    for row, item in enumerate(classes):
        _, color, hatch = style.CLASSES[item.name]
        left.barh(
            row, item.share.value, color=color, alpha=0.55, hatch=hatch,
            edgecolor=color, height=0.62,
        )  # fmt: skip
        left.text(
            item.share.value + 0.02, row, f"{100 * item.share.value:.1f} %",
            va="center", fontsize=9,
        )  # fmt: skip
        right.errorbar(
            item.generated.value, row - 0.13, xerr=item.generated.error, fmt="o",
            mfc="white", color=style.INK, markersize=5,
        )  # fmt: skip
        right.errorbar(
            item.reconstructed.value, row + 0.13, xerr=item.reconstructed.error,
            fmt="D", color=style.RECONSTRUCTED["color"], markersize=5,
        )  # fmt: skip
    left.set_yticks(rows, [style.CLASSES[c.name][0] for c in classes])
    left.set_xlim(0, 1)
    right.set_yticks(rows, [])
    for axes in (left, right):
        axes.set_ylim(len(classes) - 0.5, -0.5)
        style.tidy(axes)
    left.set_xlabel("share of the selected signal")
    right.set_xlabel("A_FB")
    style.heading(right, "○ generated   ◆ reconstructed")
    style.small_print(figure, caption)
    return figure
