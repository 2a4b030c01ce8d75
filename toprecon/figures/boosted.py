"""Fat jets: what grooming does to the mass, the tag, and branches against energy."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any, Protocol

import numpy as np
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator
from numpy.typing import ArrayLike, NDArray

from toprecon.boosted import Roc, TagRates
from toprecon.constants import TOP_MASS, W_MASS
from toprecon.events import BEAMS, EventTable
from toprecon.figures import style
from toprecon.statistics import Measured

FloatArray = NDArray[np.float64]

MASS_RANGE = (0.0, 350.0)
W_RANGE = (0.0, 160.0)
NEAR_TOP = 25.0
"""Groomed masses this near to the top mass enter the figure of the W candidate [GeV]."""

BRANCHES = {
    "resolved": {"color": style.BLUE, "marker": "o", "linestyle": "--"},
    "boosted": {"color": style.ORANGE, "marker": "D", "linestyle": "-"},
}
OTHERS = (
    {"color": style.GREEN, "marker": "s", "linestyle": "-."},
    {"color": style.PURPLE, "marker": "^", "linestyle": ":"},
)


class BranchPoint(Protocol):
    """What a branch gives for one sample, see :func:`branch_figure`."""

    @property
    def branch(self) -> str:
        """Name of the branch."""

    @property
    def sqrt_s(self) -> float:
        """Collision energy [GeV]."""

    @property
    def helicity(self) -> str:
        """Helicity of the beams."""

    @property
    def efficiency(self) -> Measured:
        """Share of the signal selected."""

    @property
    def generated_selected(self) -> Measured:
        """Generated A_FB of the events selected."""

    @property
    def shift(self) -> Measured:
        """Reconstructed minus generated of the same events."""

    @property
    def possible(self) -> Measured:
        """Share of the signal in which the branch can be right."""


def fat_jet_figure(
    table: EventTable | Mapping[str, ArrayLike],
    *,
    weight: ArrayLike | None = None,
    caption: str = "",
    figure: Figure | None = None,
) -> Figure:
    """Draw the mass of the hadronic fat jet before and after grooming, and the W in it.

    Parameters
    ----------
    table : EventTable or mapping of array, shape (F,)
        With ``boosted.mass``, ``boosted.groomed_mass`` and ``boosted.w_mass`` [GeV];
        undefined values are left out.
    weight : array, shape (F,), optional
        Weights; 0 leaves a fat jet out.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        Left: both masses, with median and the shortest interval that holds half of
        them. Right: mass of the W candidate where the groomed mass is near the top's.
    """
    plain, groomed, w = (
        np.asarray(table[f"boosted.{name}"], dtype=np.float64)
        for name in ("mass", "groomed_mass", "w_mass")
    )
    weights = np.ones(len(plain)) if weight is None else np.asarray(weight, float)
    figure = style.blank(figure, (7.2, 3.0))
    left = figure.add_axes((0.09, 0.21, 0.49, 0.6))
    right = figure.add_axes((0.68, 0.21, 0.3, 0.6))
    near = np.abs(groomed - TOP_MASS) < NEAR_TOP
    for label, values, look in (
        ("before grooming", plain, style.SIGNAL_ONLY),
        ("groomed", groomed, style.RECONSTRUCTED),
    ):
        middle, low, high = _median_and_half(values, weights)
        said = (
            f"{label}: median {middle:.0f} GeV, half of them in "
            f"{low:.0f} to {high:.0f} GeV"
        )
        _steps(left, values, weights, MASS_RANGE, 70, label=said, **look)
    _steps(right, w[near], weights[near], W_RANGE, 40, **style.RECONSTRUCTED)
    for axes, mass, name in ((left, TOP_MASS, "top"), (right, W_MASS, "W")):
        axes.axvline(mass, color=style.FAINT, linewidth=1, linestyle=":")
        axes.set_ylim(bottom=0)
        axes.annotate(
            name, (mass, 1), (3, -2), xycoords=("data", "axes fraction"),
            textcoords="offset points", va="top", fontsize=8, color=style.FAINT,
        )  # fmt: skip
        style.tidy(axes)
    left.set(xlabel="mass of the hadronic fat jet [GeV]", ylabel="share per 5 GeV")
    right.set(xlabel="mass of the W candidate [GeV]", ylabel="share per 4 GeV")
    left.legend(
        loc="lower left", bbox_to_anchor=(-0.03, 1.0), frameon=False, fontsize=8,
        labelcolor=style.INK, borderaxespad=0.1,
    )  # fmt: skip
    right.set_title(
        f"groomed mass within {NEAR_TOP:g} GeV\nof the top", loc="left", fontsize=8.5,
        color=style.INK,
    )  # fmt: skip
    style.small_print(figure, caption)
    return figure


def tag_figure(
    curve: Roc,
    cuts: TagRates | None = None,
    *,
    caption: str = "",
    figure: Figure | None = None,
) -> Figure:
    """Draw the mistag rate of a tag against its efficiency.

    Parameters
    ----------
    curve : Roc
        Of the likelihood ratio.
    cuts : TagRates, optional
        Those of the cuts, marked with their errors.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        Logarithmic in the mistag rate; the lower, the better.
    """
    figure = style.blank(figure, (7.2, 3.0))
    axes = figure.add_axes((0.11, 0.21, 0.55, 0.72))
    seen = curve.mistag > 0
    axes.plot(
        curve.efficiency[seen], curve.mistag[seen], drawstyle="steps-post",
        label=f"likelihood ratio\n(area {curve.area:.3f})", **style.RECONSTRUCTED,
    )  # fmt: skip
    if cuts is not None and cuts.mistag > 0:
        axes.errorbar(
            cuts.efficiency, cuts.mistag, xerr=cuts.efficiency_error,
            yerr=cuts.mistag_error, fmt="o", color=style.INK, markersize=5,
            label=f"cuts: {100 * cuts.efficiency:.0f} % of tops,\n"
            f"{100 * cuts.mistag:.1f} % of others",
        )  # fmt: skip
    axes.set_yscale("log")
    lowest = curve.mistag[seen].min() if seen.any() else 1e-3
    axes.set(xlim=(0, 1), ylim=(0.7 * lowest, 1.2))
    axes.set(xlabel="share of tops tagged", ylabel="share of other fat jets tagged")
    style.tidy(axes)
    style.legend_beside(axes, place=1.03)
    style.small_print(figure, caption)
    return figure


def branch_figure(
    rows: Sequence[BranchPoint], *, caption: str = "", figure: Figure | None = None
) -> Figure:
    """Draw what the branches give against the collision energy.

    Parameters
    ----------
    rows : sequence
        One per branch and sample, such as ``compare_branches(...).rows``.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        Left: signal in which the branch can be right (every quark with a jet of its
        own; all quarks inside their fat jets). Middle: signal selected. Right: shift of
        A_FB by the reconstruction over the generated value of the same events. Filled:
        e-L e+R; open: e-R e+L and mixed beams.
    """
    figure = style.blank(figure, (7.2, 3.0))
    possible, selected, shift = (
        figure.add_axes((x, 0.21, 0.235, 0.59)) for x in (0.065, 0.4, 0.745)
    )
    names = list(dict.fromkeys(row.branch for row in rows))
    energies = sorted({row.sqrt_s for row in rows})
    reach = energies[-1] - energies[0]
    spacing = 0.02 * (reach or energies[0])
    others = iter(OTHERS * len(names))
    looks: dict[str, dict[str, Any]] = {
        name: dict(BRANCHES[name] if name in BRANCHES else next(others))
        for name in names
    }
    series = list(dict.fromkeys((row.branch, row.helicity) for row in rows))
    for place, (name, helicity) in enumerate(series):
        mine = sorted(
            (r for r in rows if (r.branch, r.helicity) == (name, helicity)),
            key=lambda r: r.sqrt_s,
        )
        look = {
            **looks[name],
            "mfc": looks[name]["color"] if helicity == "LR" else style.PAPER,
            "markersize": 5.5,
            "linewidth": 1.2,
            "label": f"{name}, {BEAMS.get(helicity, helicity)}",
        }
        x = [r.sqrt_s + (place - 0.5 * (len(series) - 1)) * spacing for r in mine]
        scale = [r.generated_selected.value or math.nan for r in mine]
        shift.errorbar(
            x,
            [r.shift.value / s for r, s in zip(mine, scale, strict=True)],
            yerr=[r.shift.error / abs(s) for r, s in zip(mine, scale, strict=True)],
            **look,
        )
        for axes, shares in (
            (possible, [r.possible for r in mine]),
            (selected, [r.efficiency for r in mine]),
        ):
            axes.errorbar(
                x, [s.value for s in shares], yerr=[s.error for s in shares], **look
            )
    shift.axhline(0, color=style.INK, linewidth=0.8, zorder=0)
    for axes, title in (
        (possible, "can be right, of all signal"),
        (selected, "selected, of all signal"),
        (shift, f"shift of {style.A_FB}, relative"),
    ):
        if axes is not shift:
            axes.set_ylim(0, 1)
        axes.set_title(title, loc="left", fontsize=9, color=style.INK)
        axes.set_xlabel("collision energy [GeV]")
        if len(energies) < 2 or np.diff(energies).min() > 0.3 * reach:
            axes.set_xticks(energies)
        else:
            axes.xaxis.set_major_locator(MaxNLocator(3))
        axes.set_xlim(
            energies[0] - 3 * len(series) * spacing,
            energies[-1] + 3 * len(series) * spacing,
        )
        style.tidy(axes)
    figure.legend(
        *possible.get_legend_handles_labels(), loc="upper left",
        bbox_to_anchor=(0.03, 1.0), ncols=4, frameon=False, fontsize=8.5,
        labelcolor=style.INK, columnspacing=1.2,
    )  # fmt: skip
    style.small_print(figure, caption)
    return figure


def _median_and_half(
    values: FloatArray, weight: FloatArray
) -> tuple[float, float, float]:
    """Weighted median, and the shortest interval that holds half of the weight."""
    keep = np.isfinite(values) & (weight > 0)
    if not keep.any():
        return math.nan, math.nan, math.nan
    order = np.argsort(values[keep])
    x, w = values[keep][order], weight[keep][order]
    below = np.cumsum(w) - w
    half = 0.5 * w.sum()
    # interval k starts at x[k] and stops where half of the weight is inside
    stop = np.searchsorted(below + w, (below + half) * (1 - 1e-12))
    start = np.flatnonzero(stop < len(x))
    best = start[np.argmin(x[stop[start]] - x[start])]
    middle = x[np.searchsorted(below + w, half * (1 - 1e-12))]
    return float(middle), float(x[best]), float(x[stop[best]])


def _steps(
    axes: Any,
    values: FloatArray,
    weight: FloatArray,
    interval: tuple[float, float],
    n: int,
    **look: Any,
) -> None:
    """Draw a histogram as shares of everything defined, also of what lies outside."""
    keep = np.isfinite(values)
    counts, edges = np.histogram(values[keep], n, interval, weights=weight[keep])
    total = weight[keep].sum()
    axes.stairs(counts / total if total else counts, edges, **look)
    axes.set_xlim(*interval)
