"""Colours, line styles, numbers and the small print shared by all figures.

The colours are those of Okabe and Ito (2008), which colour-blind readers can tell
apart; every series also has its own line style or hatching.
"""

from __future__ import annotations

import io
import math
from typing import Any

from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure

from toprecon.statistics import Measured

INK = "#22262b"
FAINT = "#7b838b"
PALE = "#d9dde1"
PAPER = "#ffffff"
BLUE = "#0072b2"
ORANGE = "#d55e00"
GREEN = "#009e73"
PURPLE = "#b0568e"

DPI = 144
"""Dots per inch of pictures: sharp on screens of twice the usual density as well."""

A_FB = r"A$_{\mathrm{FB}}$"

GENERATED: dict[str, Any] = {"color": FAINT, "linestyle": "-", "linewidth": 1.3}
SELECTED: dict[str, Any] = {"color": INK, "linestyle": "-", "linewidth": 1.5}
CLOSEST: dict[str, Any] = {"color": PURPLE, "linestyle": ":", "linewidth": 1.8}
CHOSEN: dict[str, Any] = {"color": GREEN, "linestyle": "-.", "linewidth": 1.4}
RECONSTRUCTED: dict[str, Any] = {"color": ORANGE, "linestyle": "-", "linewidth": 1.8}
SIGNAL_ONLY: dict[str, Any] = {"color": BLUE, "linestyle": "--", "linewidth": 1.5}

CLASSES = {
    "correct": ("correct", GREEN, ""),
    "b_swapped": ("b jets swapped", ORANGE, "////"),
    "w_mixed": ("W jets mixed", "#e69f00", "\\\\\\\\"),
    "unmatched": ("unmatched", "#56b4e9", "...."),
    "leaking": ("leaking", "#cc79a7", "xx"),
    "no_truth": ("no truth", "#b0b0b0", ""),
    "not_signal": ("not signal", "#909090", "--"),
    "outside": ("outside phase space", "#cc79a7", "++"),
    "background": ("background", "#999999", "oo"),
}
"""Name, colour and hatching of the classes, in the order in which they are stacked."""


class Drawing(Figure):
    """A figure that a notebook shows when it is the last thing in a cell."""

    def _repr_png_(self) -> bytes:
        return png(self)


def blank(figure: Figure | None, size: tuple[float, float]) -> Figure:
    """Return an empty figure: the one given, cleared, or a new one."""
    if figure is None:
        figure = Drawing(figsize=size, dpi=DPI, facecolor=PAPER)
        FigureCanvasAgg(figure)
    else:
        figure.clear()
        figure.set_size_inches(size)
    return figure


def tidy(axes: Any) -> None:
    """Draw axes plainly: ticks inside and below the data, no frame top and right."""
    axes.set_axisbelow(True)
    axes.tick_params(direction="in", color=FAINT, labelcolor=INK, labelsize=9)
    axes.tick_params(axis="x", pad=5)
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        axes.spines[side].set_color(FAINT)
    axes.xaxis.label.set(color=INK, fontsize=10)
    axes.yaxis.label.set(color=INK, fontsize=10)


def small_print(figure: Figure, text: str) -> None:
    """Say at the bottom what the numbers rest on."""
    figure.text(0.012, 0.012, text, ha="left", va="bottom", fontsize=7.5, color=FAINT)


def pm(number: Measured, *, sign: bool = False) -> str:
    """Return a number with its error, rounded to it, for people.

    Parameters
    ----------
    number : Measured
        Value and error.
    sign : bool
        Whether a plus sign is written.

    Returns
    -------
    str
        Such as ``0.381 ± 0.012``; ``missing`` if there is no value.
    """
    text = str(number).replace("+-", "±").replace("-", "−")
    return f"+{text}" if sign and number.value > 0 else text


def readable_on(color: Any) -> str:
    """Return black or white, whichever stands out more from a colour (WCAG 2.1)."""
    linear = [
        c / 12.92 if c <= 0.03928 else ((c + 0.055) / 1.055) ** 2.4
        for c in to_rgb(color)
    ]
    luminance = 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]
    return "#000000" if luminance > 0.179 else "#ffffff"


def signed(number: Measured) -> str:
    """Return the value alone, with its sign, rounded to its error."""
    if math.isnan(number.value):
        return "missing"
    return f"{number.value:+.{number.digits}f}".replace("-", "−")


def legend_beside(axes: Any, *, place: float = 1.02, upside_down: bool = False) -> None:
    """Put the legend to the right of the axes.

    Parameters
    ----------
    axes : Axes
        With labelled artists.
    place : float
        Left end, in widths of the axes.
    upside_down : bool
        Whether the last artist comes first, as in a stack.
    """
    handles, labels = axes.get_legend_handles_labels()
    step = -1 if upside_down else 1
    axes.legend(
        handles[::step], labels[::step], loc="upper left", bbox_to_anchor=(place, 1.03),
        frameon=False, fontsize=9, labelcolor=INK,
        labelspacing=None if upside_down else 0.9,
    )  # fmt: skip


def heading(axes: Any, text: str) -> None:
    """Write the one line that says what is seen."""
    axes.set_title(text, loc="left", fontsize=10.5, color=INK, pad=8)


def png(figure: Figure, *, dpi: int = DPI) -> bytes:
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
