"""Pairing classes: how many, what each does to A_FB, and what a cut makes of them."""

from __future__ import annotations

import numpy as np
from matplotlib.figure import Figure

from toprecon.asymmetry import AsymmetryResult
from toprecon.events import Binning, Observable
from toprecon.figures import style
from toprecon.figures.cuts import Classes

MATCHED = ("correct", "b_swapped", "w_mixed")


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
    figure = style.blank(figure, (7.2, 2.6))
    left = figure.add_axes((0.17, 0.25, 0.29, 0.6))
    right = figure.add_axes((0.56, 0.25, 0.41, 0.6))
    classes = [c for n in style.CLASSES if (c := result.by_class.get(n)) is not None]
    rows = list(range(len(classes)))
    reco = style.RECONSTRUCTED["color"]
    for row, item in enumerate(classes):
        _, color, hatch = style.CLASSES[item.name]
        left.barh(
            row, item.share.value, color=color, alpha=0.55, hatch=hatch,
            edgecolor=color, height=0.62, linewidth=0,
        )  # fmt: skip
        left.text(
            item.share.value + 0.02, row, f"{100 * item.share.value:.1f} %",
            va="center", fontsize=9,
        )  # fmt: skip
        right.errorbar(
            item.generated.value, row - 0.15, xerr=item.generated.error, fmt="o",
            mfc="white", color=style.INK, markersize=5, label="generated",
        )  # fmt: skip
        right.errorbar(
            item.reconstructed.value, row + 0.15, xerr=item.reconstructed.error,
            fmt="D", color=reco, markersize=5, label="reconstructed",
        )  # fmt: skip
    left.set_yticks(rows, [style.CLASSES[c.name][0] for c in classes])
    left.set_xlim(0, 1.12)
    left.set_xticks([0, 0.5, 1])
    right.set_yticks(rows, [])
    right.margins(x=0.08)
    for axes in (left, right):
        axes.set_ylim(len(classes) - 0.5, -0.5)
        style.tidy(axes)
        axes.tick_params(axis="y", length=0)
    left.set_xlabel("share of the selected signal")
    right.set_xlabel(style.A_FB)
    handles, labels = right.get_legend_handles_labels()
    right.legend(
        handles[:2], labels[:2], loc="lower left", bbox_to_anchor=(-0.02, 1.0), ncols=2,
        frameon=False, fontsize=9, labelcolor=style.INK,
    )  # fmt: skip
    style.small_print(figure, caption)
    return figure


def purity_figure(
    observable: Observable,
    binning: Binning,
    classes: Classes,
    *,
    low: float | None = None,
    high: float | None = None,
    is_upper: bool = True,
    caption: str = "",
    figure: Figure | None = None,
) -> Figure:
    """Draw what a cut on an observable would leave, against the place of the cut.

    Parameters
    ----------
    observable : Observable
        What would be cut on.
    binning : Binning
        Fine bins.
    classes : mapping of array, shape (B,)
        Sums of weights by class, all other cuts applied.
    low, high : float, optional
        The cut in use, marked.
    is_upper : bool
        Whether the place is that of the upper limit (events below are kept) or of the
        lower one.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        Right pairings as a share of the matched and of all signal events kept, and
        the share of the signal events that is kept.
    """
    figure = style.blank(figure, (7.2, 2.9))
    axes = figure.add_axes((0.105, 0.225, 0.6, 0.68))
    signal = {n: v for n, v in classes.items() if n not in ("outside", "background")}
    kept = {name: _kept(values, is_upper) for name, values in signal.items()}
    nothing = np.zeros(len(binning))
    correct = kept.get("correct", nothing)
    matched = sum((kept.get(name, nothing) for name in MATCHED), nothing)
    everything = sum(kept.values(), nothing)
    places = binning.array[1:] if is_upper else binning.array[:-1]
    with np.errstate(invalid="ignore", divide="ignore"):
        curves = (
            ("correct, of the matched\nevents kept", correct / matched, style.CHOSEN),
            ("correct, of all signal\nevents kept", correct / everything,
             style.SIGNAL_ONLY),
            ("kept, of all signal\nevents of this figure",
             everything / max(everything.max(), 1e-300), style.GENERATED),
        )  # fmt: skip
    for label, values, look in curves:
        axes.plot(places, values, label=label, **look)
    limit = high if is_upper else low
    if limit is not None:
        axes.axvline(limit, color=style.INK, linewidth=1.2)
    axes.set(xlim=(binning.edges[0], binning.edges[-1]), ylim=(0, 1.03))
    axes.set_xlabel(
        f"{'upper' if is_upper else 'lower'} limit on {observable.axis_label}"
    )
    axes.set_ylabel("share")
    style.tidy(axes)
    style.legend_beside(axes)
    style.small_print(figure, caption)
    return figure


def _kept(values: np.ndarray, is_upper: bool) -> np.ndarray:
    """Add up what lies below, or not below, the end of every bin."""
    return np.cumsum(values) if is_upper else np.cumsum(values[::-1])[::-1]
