"""Colours, line styles and the small print shared by all figures.

The colours are those of Okabe and Ito (2008), which colour-blind readers can tell
apart; every series also has its own line style or hatching.
"""

from __future__ import annotations

import io
from typing import Any

from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from toprecon.statistics import Measured

INK = "#22262b"
FAINT = "#8a9199"
PAPER = "#ffffff"

GENERATED: dict[str, Any] = {"color": "#22262b", "linestyle": "-", "linewidth": 1.6}
SELECTED: dict[str, Any] = {"color": "#0072b2", "linestyle": "--", "linewidth": 1.6}
CHOSEN: dict[str, Any] = {"color": "#009e73", "linestyle": "-.", "linewidth": 1.4}
RECONSTRUCTED: dict[str, Any] = {"color": "#d55e00", "linestyle": "-", "linewidth": 1.6}

CLASSES = {
    "correct": ("correct", "#009e73", ""),
    "b_swapped": ("b jets swapped", "#d55e00", "////"),
    "w_mixed": ("W jets mixed", "#e69f00", "\\\\\\\\"),
    "unmatched": ("unmatched", "#56b4e9", "...."),
    "leaking": ("leaking", "#cc79a7", "xx"),
    "no_truth": ("no truth", "#b0b0b0", ""),
    "not_signal": ("not signal", "#909090", ""),
    "outside": ("outside phase space", "#cc79a7", "++"),
    "background": ("background", "#999999", "oo"),
}
"""Name, colour and hatching of the classes, in the order in which they are stacked."""


def blank(figure: Figure | None, size: tuple[float, float]) -> Figure:
    """Return an empty figure: the one given, cleared, or a new one."""
    if figure is None:
        figure = Figure(figsize=size, dpi=100, facecolor=PAPER)
        FigureCanvasAgg(figure)
    else:
        figure.clear()
    return figure


def tidy(axes: Any) -> None:
    """Draw axes plainly: ticks inside, no frame on top and right."""
    axes.tick_params(direction="in", color=FAINT, labelcolor=INK, labelsize=9)
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        axes.spines[side].set_color(FAINT)
    axes.xaxis.label.set(color=INK, fontsize=10)
    axes.yaxis.label.set(color=INK, fontsize=10)


def small_print(figure: Figure, text: str) -> None:
    """Say at the bottom what the numbers rest on."""
    figure.text(0.995, 0.008, text, ha="right", va="bottom", fontsize=7.5, color=FAINT)


def pm(number: Measured) -> str:
    """Return a number with its error, for people."""
    return str(number).replace("+-", "±")


def heading(axes: Any, text: str) -> None:
    """Write the one line that says what is seen."""
    axes.set_title(text, loc="left", fontsize=10.5, color=INK, pad=8)


def png(figure: Figure, *, dpi: int = 100) -> bytes:
    """Return the figure as a PNG picture.

    Parameters
    ----------
    figure : Figure
        Drawn with the functions of this folder.
    dpi : int
        Dots per inch.

    Returns
    -------
    bytes
        The file.
    """
    stream = io.BytesIO()
    figure.savefig(
        stream, format="png", dpi=dpi, facecolor=PAPER, pil_kwargs={"compress_level": 1}
    )
    return stream.getvalue()
