"""One event: momenta of its objects, with the chosen and the true assignment."""

from __future__ import annotations

import dataclasses
import math
from typing import Any

import numpy as np
from matplotlib.figure import Figure
from numpy.typing import NDArray

from toprecon.figures import style

SIDES = {"top": style.BLUE, "antitop": style.ORANGE, "": style.FAINT}
LOOKS = {
    "b": {"linewidth": 2.6, "linestyle": "-"},
    "W": {"linewidth": 1.5, "linestyle": "-"},
    "lepton": {"linewidth": 1.5, "linestyle": "--"},
    "neutrino": {"linewidth": 1.5, "linestyle": ":"},
    "": {"linewidth": 1.0, "linestyle": "-"},
}
"""Line of an object by its role."""


@dataclasses.dataclass(frozen=True)
class EventObject:
    """A reconstructed object, or a generated quark or lepton.

    Parameters
    ----------
    name : str
        Such as ``jet 3``.
    momentum : array, shape (4,)
        E, px, py, pz [GeV].
    side, role : str
        ``top``, ``antitop`` or empty; ``b``, ``W``, ``lepton``, ``neutrino`` or empty.
    true_side, true_role : str
        The same as the generated quarks say; empty if they say nothing.
    b_score : float
        NaN for what is no jet.
    """

    name: str
    momentum: NDArray[np.float64]
    side: str = ""
    role: str = ""
    true_side: str = ""
    true_role: str = ""
    b_score: float = math.nan


@dataclasses.dataclass(frozen=True)
class EventView:
    """What is drawn of one event.

    Parameters
    ----------
    objects : tuple of EventObject
        Reconstructed.
    generated : tuple of EventObject
        Generated quarks and leptons; empty without truth.
    top : array, shape (4,)
        Reconstructed top, which sets the plane of the picture; NaN without one.
    facts : tuple of str
        Lines beside the picture.
    """

    objects: tuple[EventObject, ...]
    generated: tuple[EventObject, ...]
    top: NDArray[np.float64]
    facts: tuple[str, ...]


def event_figure(
    view: EventView, *, caption: str = "", figure: Figure | None = None
) -> Figure:
    """Draw the momenta of one event in the plane of the beam and the top.

    Parameters
    ----------
    view : EventView
        The event.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        Arrows: reconstructed objects, coloured by the side they are assigned to.
        Circles: where the generated quarks point, in the colour of their own top. A
        table compares the two assignments.
    """
    figure = style.blank(figure, (7.2, 4.9))
    axes = figure.add_axes((0.085, 0.13, 0.5, 0.735))
    across = _transverse(view)
    reach = 1.0
    for item in (*view.generated, *view.objects):
        reach = max(reach, float(np.abs(_project(item, across)).max()))
    reach *= 1.22
    axes.plot([-reach, reach], [0, 0], color=style.PALE, linewidth=1, zorder=0)
    axes.text(-0.97 * reach, 0.03 * reach, "e⁻ →", fontsize=9, color=style.FAINT)
    axes.text(
        0.97 * reach, 0.03 * reach, "← e⁺", fontsize=9, color=style.FAINT, ha="right"
    )
    for item in view.generated:
        x, y = _project(item, across)
        axes.plot(
            x, y, "o", markersize=11 if item.role == "b" else 8, mfc="none",
            mec=SIDES[item.side], mew=1.3, zorder=2,
        )  # fmt: skip
    for item in view.objects:
        _arrow(axes, item, across)
    if np.isfinite(view.top).all():
        x, y = view.top[3], float(np.dot(view.top[1:3], across))
        size = math.hypot(x, y) or 1.0
        axes.plot(
            [-x / size * reach, x / size * reach], [-y / size * reach, y / size * reach],
            color=style.FAINT, linewidth=0.8, linestyle=(0, (6, 4)), zorder=0,
        )  # fmt: skip
    axes.set(xlim=(-reach, reach), ylim=(-reach, reach), aspect="equal")
    axes.set_xlabel("momentum along the electron beam [GeV]")
    axes.set_ylabel("towards the top, across the beam [GeV]")
    style.tidy(axes)
    _key(figure)
    _table(figure, view)
    style.small_print(figure, caption)
    return figure


def _transverse(view: EventView) -> NDArray[np.float64]:
    """Direction across the beam in which the reconstructed top goes."""
    direction = np.asarray(view.top[1:3], dtype=np.float64)
    size = float(np.hypot(*direction))
    return direction / size if np.isfinite(size) and size > 0 else np.array([1.0, 0.0])


def _project(item: EventObject, across: NDArray[np.float64]) -> NDArray[np.float64]:
    """Momentum along and across the beam."""
    return np.array([item.momentum[3], np.dot(item.momentum[1:3], across)])


def _arrow(axes: Any, item: EventObject, across: NDArray[np.float64]) -> None:
    """Draw an object from the origin, its name at the tip."""
    x, y = _project(item, across)
    if not np.isfinite([x, y]).all():
        return
    color = SIDES[item.side]
    axes.annotate(
        "", (x, y), (0, 0),
        arrowprops={"arrowstyle": "-|>", "color": color, "shrinkA": 0, "shrinkB": 0,
                    **LOOKS[item.role]},
    )  # fmt: skip
    size = math.hypot(x, y) or 1.0
    axes.annotate(
        item.name.removeprefix("jet "), (x, y), (13 * x / size, 13 * y / size),
        textcoords="offset points", ha="center", va="center", fontsize=8.5,
        color=color,
    )  # fmt: skip


def _key(figure: Figure) -> None:
    """Explain the colours and lines."""
    x = 0.085
    for name, color in (("top", style.BLUE), ("antitop", style.ORANGE)):
        figure.text(x, 0.955, name, fontsize=9.5, color=color, fontweight="bold")
        x += 0.03 + 0.0145 * len(name)
    figure.text(
        x + 0.01, 0.955, "arrows: as assigned, thick for b", fontsize=9,
        color=style.FAINT,
    )  # fmt: skip
    figure.text(
        0.085, 0.91, "circles: generated    dashes: reconstructed top", fontsize=9,
        color=style.FAINT,
    )  # fmt: skip


def _table(figure: Figure, view: EventView) -> None:
    """List the objects, and what the picture cannot say."""
    x = (0.6, 0.705, 0.755, 0.78, 0.887)
    y, step = 0.955, 0.043
    heads = ("", "E", "b", "assigned", "generated")
    for place, text, side in zip(x, heads, ("left", "right", "right", "left", "left"),
                                 strict=True):  # fmt: skip
        figure.text(place, y, text, fontsize=8.5, color=style.FAINT, ha=side)
    for item in view.objects:
        y -= step
        score = "" if math.isnan(item.b_score) else f"{item.b_score:.2f}"
        energy = f"{item.momentum[0]:.0f}" if np.isfinite(item.momentum[0]) else ""
        figure.text(x[0], y, item.name, fontsize=9, color=style.INK)
        figure.text(x[1], y, energy, fontsize=9, ha="right", color=style.INK)
        figure.text(x[2], y, score, fontsize=9, ha="right", color=style.INK)
        for place, side, role in (
            (x[3], item.side, item.role),
            (x[4], item.true_side, item.true_role),
        ):
            text = f"{side} {role}".strip()
            figure.text(place, y, text, fontsize=9, color=SIDES[side])
    y -= 0.5 * step
    for line in view.facts:
        y -= step
        figure.text(x[0], y, line, fontsize=9, color=style.INK)
