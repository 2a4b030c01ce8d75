"""The production angle: generated against reconstructed, with their ratio."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from matplotlib.figure import Figure

from toprecon.asymmetry import AsymmetryResult
from toprecon.figures import style
from toprecon.figures.live import LiveFigure, top_of_axis
from toprecon.statistics import Measured

GROUP = 2
"""Fine bins joined: 20 bins of cos(theta)."""

EDGES = np.linspace(-1, 1, 40 // GROUP + 1)
CENTRES = 0.5 * (EDGES[1:] + EDGES[:-1])

ROWS: dict[str, tuple[str, dict[str, Any]]] = {
    "generated": ("generated, all signal events", style.GENERATED),
    "generated_selected": ("generated, selected", style.SELECTED),
    "closest": ("jets of the generated quarks", style.CLOSEST),
    "chosen": ("chosen jets, true charge", style.CHOSEN),
    "reconstructed_signal": ("reconstructed, signal alone", style.SIGNAL_ONLY),
    "reconstructed": ("reconstructed", style.RECONSTRUCTED),
}
"""Variants of the angle that can be drawn: name and look."""

USUAL = ("generated", "generated_selected", "reconstructed")

SCALED = ("generated", "closest")
"""Variants of other events, scaled to the area of the selected ones."""

COLUMN, LAST_COLUMN = 0.475, 0.655
"""Places of the columns of numbers."""

SPANS = (0.15, 0.3, 0.6, 1.0)
"""Half widths of the axis of the ratio."""


class AngleFigure(LiveFigure):
    """cos(theta) of the top, drawn again at every move of a cut.

    Parameters
    ----------
    variants : sequence of str
        Keys of :data:`ROWS`; ``generated_selected`` is what the others are divided by
        and always there.
    caption : str
        Small print: what the numbers rest on.
    """

    def __init__(self, variants: Sequence[str] = USUAL, *, caption: str = "") -> None:
        super().__init__((7.2, 4.9))
        self._names = [n for n in ROWS if n in variants or n == "generated_selected"]
        grid = self.figure.add_gridspec(
            2, 1, height_ratios=(2.5, 1), hspace=0.08, left=0.105, right=0.972,
            bottom=0.145, top=0.925 - 0.042 * len(self._names),
        )  # fmt: skip
        self._upper = self.figure.add_subplot(grid[0])
        self._lower = self.figure.add_subplot(grid[1], sharex=self._upper)
        self._curves: dict[str, tuple[Any, Any]] = {}
        self._numbers: dict[str, tuple[Any, Any]] = {}
        self._header()
        nothing = np.zeros(len(CENTRES))
        for name in self._names:
            look = ROWS[name][1]
            look = {**look, "zorder": 3 if name == "reconstructed" else 2}
            self._curves[name] = (
                self._upper.stairs(nothing, EDGES, baseline=None, **look),
                self._lower.stairs(nothing, EDGES, baseline=None, **look),
            )
        color = style.RECONSTRUCTED["color"]
        self._bars = tuple(
            axes.vlines(CENTRES, nothing, nothing, color=color, linewidth=1, zorder=3)
            for axes in (self._upper, self._lower)
        )
        self._upper.set(xlim=(-1, 1), ylim=(0, 1e-9))
        self._upper.tick_params(labelbottom=False)
        self._lower.set_ylim(1 - SPANS[0], 1 + SPANS[0])
        self._lower.set_ylabel("ratio to\nselected")
        self._lower.set_xlabel("cos θ of the top quark to the electron beam")
        for axes in (self._upper, self._lower):
            style.tidy(axes)
        self._lower.yaxis.label.set_fontsize(9)
        self.text(0.012, 0.02, caption, fontsize=7.5, color=style.FAINT)

    def _header(self) -> None:
        """Lay the legend out as a table with a column of numbers."""
        y = 0.968
        for x, title in ((COLUMN, style.A_FB), (LAST_COLUMN, "change")):
            self.text(x, y, title, color=style.FAINT)
        for name in self._names:
            y -= 0.042
            label, look = ROWS[name]
            self.rests(*self.overlay.plot([0.105, 0.15], [y, y], **look))
            self.text(0.163, y, label, color=style.INK)
            self._numbers[name] = (
                self.text(COLUMN, y, "", moves=True, color=style.INK),
                self.text(LAST_COLUMN, y, "", moves=True, color=style.INK),
            )

    def update(self, result: AsymmetryResult, *, expected: bool = False) -> None:
        """Show another result.

        Parameters
        ----------
        result : AsymmetryResult
            For one setting of the beams.
        expected : bool
            Whether the sums are expected events.
        """
        selected, _ = result.spectra.rebinned("generated_selected", GROUP)
        area = selected.sum()
        highest, span = 1e-9, 0.0
        for name in self._names:
            values, variances = result.spectra.rebinned(name, GROUP)
            if name in SCALED and values.sum():
                scale = area / values.sum()
                values, variances = values * scale, variances * scale**2
            with np.errstate(invalid="ignore", divide="ignore"):
                ratio = np.where(selected > 0, values / selected, np.nan)
                error = np.sqrt(variances) / selected
            upper, lower = self._curves[name]
            upper.set_data(values)
            lower.set_data(ratio)
            highest = max(highest, float(values.max()))
            span = max(span, float(np.nanmax(np.abs(ratio - 1), initial=0)))
            if name == "reconstructed":
                self._set_bars(values, np.sqrt(variances), ratio, error)
        self._upper.set_ylim(0, top_of_axis(highest, self._upper.get_ylim()[1]))
        self._lower.set_ylim(*_around_one(span, self._lower.get_ylim()[1] - 1))
        self._upper.set_ylabel("expected events" if expected else "sum of weights")
        changes = _changes(result)
        for name, (number, change) in self._numbers.items():
            number.set_text(style.pm(getattr(result, name)))
            text = changes.get(name)
            change.set_text("" if text is None else text)

    def _set_bars(
        self, values: Any, errors: Any, ratio: Any, ratio_errors: Any
    ) -> None:
        """Place the statistical errors."""
        pairs = ((values, errors), (ratio, ratio_errors))
        for bars, (middle, half) in zip(self._bars, pairs, strict=True):
            ends = np.stack([middle - half, middle + half], axis=1)
            x = np.broadcast_to(CENTRES[:, None], ends.shape)
            segments = np.stack([x, ends], axis=2)
            bars.set_segments(segments[np.isfinite(ends).all(axis=1)])


def _changes(result: AsymmetryResult) -> dict[str, str]:
    """Differences shown beside A_FB, with paired errors."""

    def words(number: Measured, cause: str) -> str:
        return f"{style.pm(number, sign=True)} {cause}"

    signal = words(result.shift, "by reconstruction")
    is_pure = result.signal_sum == result.selected_sum
    reconstructed = signal if is_pure else words(result.total_shift, "in all")
    return {
        "generated_selected": words(result.acceptance_shift, "by selection"),
        "reconstructed_signal": signal,
        "reconstructed": reconstructed,
    }


def _around_one(span: float, present: float) -> tuple[float, float]:
    """Limits of the ratio; the present ones if they fit well enough."""
    fitting = [half for half in SPANS if half >= 1.1 * span]
    half = fitting[0] if fitting else SPANS[-1]
    if half < present and present in SPANS[: SPANS.index(half) + 2]:
        half = present  # one step too wide is no reason to jump
    return 1 - half, 1 + half


def angle_figure(
    result: AsymmetryResult,
    *,
    variants: Sequence[str] | None = None,
    caption: str = "",
    expected: bool = False,
) -> Figure:
    """Draw cos(theta) of the top, generated and reconstructed.

    Parameters
    ----------
    result : AsymmetryResult
        For one setting of the beams.
    variants : sequence of str, optional
        Keys of :data:`ROWS`; by default generated (all and selected) and
        reconstructed, and its signal alone if there is background.
    caption : str
        Small print: what the numbers rest on.
    expected : bool
        Whether the sums are expected events.

    Returns
    -------
    Figure
        Above: the angles, those of other events scaled to the area of the selected
        ones, with A_FB and what selection and reconstruction change of it. Below:
        divided by the generated angle of the selected events. The bars are the errors
        of the reconstructed spectrum; it shares most events with the generated one.
    """
    live = AngleFigure(variants or usual_variants(result), caption=caption)
    live.update(result, expected=expected)
    return live.figure


def usual_variants(result: AsymmetryResult) -> tuple[str, ...]:
    """Return the variants that a first look needs."""
    if result.signal_sum == result.selected_sum:
        return USUAL
    return (*USUAL, "reconstructed_signal")
