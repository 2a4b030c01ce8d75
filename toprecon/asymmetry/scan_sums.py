"""The additive state of a scan of cuts: one histogram of the scanned observables.

Every selected row falls into one cell of the grid of cut values; sums over the rows
that a cut keeps are cumulative sums over cells. One pass over the rows serves all
points, and the sums of chunks add.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Sequence
from enum import StrEnum
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray
from pydantic import field_validator

from toprecon.errors import OptionError, StudyError
from toprecon.events import EventTable
from toprecon.options import Options, option

FloatArray = NDArray[np.float64]

N_PATTERNS = 6
"""Signal by (generated, reconstructed) hemisphere BB, BF, FB, FF; others by B, F."""

Cut = tuple[str, float | None, float | None]
"""Observable, lowest value kept, first value dropped."""


class Keep(StrEnum):
    """Which side of a cut is kept."""

    BELOW = "below"
    ABOVE = "above"


class ScanAxis(Options):
    """Cut values of one observable."""

    observable: str = option(..., "name of the observable, such as pairing.chi2")
    points: tuple[float, ...] = option(..., "cut values, strictly increasing")
    keep: Keep = option(
        Keep.BELOW, "side kept: values below the cut, or from the cut upwards"
    )

    @field_validator("points")
    @classmethod
    def _increasing(cls, value: tuple[float, ...]) -> tuple[float, ...]:
        if not value or any(np.diff(value) <= 0):
            msg = f"must be at least one value, strictly increasing; got {value!r}"
            raise ValueError(msg)
        return value

    @classmethod
    def spread(
        cls, observable: str, values: Any, *, n: int = 50, keep: Keep = Keep.BELOW
    ) -> Self:
        """Return cut values that keep evenly spaced shares of some values.

        Parameters
        ----------
        observable : str
            Name.
        values : array, shape (E,)
            Values of the rows of interest; NaN is left out.
        n : int
            Points; fewer if values are repeated.
        keep : Keep
            Side kept.

        Returns
        -------
        ScanAxis
            From a share of 1/n to nearly all.

        Raises
        ------
        OptionError
            If there are no finite values.
        """
        finite = np.asarray(values, dtype=np.float64)
        finite = finite[np.isfinite(finite)]
        if not len(finite):
            msg = f"{observable}: at least one finite value is required to scan it"
            raise OptionError(msg)
        shares = np.arange(1, n + 1) / n if keep is Keep.BELOW else np.arange(n) / n
        points = np.unique(np.quantile(finite, shares))
        if keep is Keep.BELOW:
            points[-1] = np.nextafter(points[-1], np.inf)  # keep the largest value too
        return cls(observable=observable, points=tuple(points.tolist()), keep=keep)

    def cut(self, index: int) -> Cut:
        """Return a cut as (observable, low, high)."""
        point = self.points[index]
        if self.keep is Keep.BELOW:
            return self.observable, None, point
        return self.observable, point, None

    def cells(self, values: Any) -> NDArray[np.int64]:
        """Return the tightest cut that keeps each value, -1 if none does.

        Parameters
        ----------
        values : array, shape (E,)
            Compared in float64; NaN passes no cut.

        Returns
        -------
        array of int, shape (E,)
            Position in ``points``.
        """
        x = np.asarray(values, dtype=np.float64)
        index = np.searchsorted(np.asarray(self.points), x, side="right")
        index = index - 1 if self.keep is Keep.ABOVE else index
        outside = np.isnan(x) | (index >= len(self.points))
        return np.where(outside, -1, index).astype(np.int64)


@dataclasses.dataclass(frozen=True)
class ScanSums:
    """Sums per cell of the grid of cut values.

    Parameters
    ----------
    axes : tuple of ScanAxis
        One or two.
    sums, squares : array, shape (2, 6, N, M)
        Sums of weights and squared weights: half A and B, pattern of hemispheres, cell.
        M is 1 for a single axis.
    rows : array of int, shape (2, 6, N, M)
        Rows.
    signal_sums, signal_squares : array, shape (2, 2)
        All signal in the truth phase space: half, generated hemisphere (B, F).
    """

    axes: tuple[ScanAxis, ...]
    sums: FloatArray
    squares: FloatArray
    rows: NDArray[np.int64]
    signal_sums: FloatArray
    signal_squares: FloatArray

    def __add__(self, other: Self) -> Self:
        if self.axes != other.axes:
            msg = "scans: equal axes are required to add them"
            raise StudyError(msg)
        return dataclasses.replace(
            self,
            sums=self.sums + other.sums,
            squares=self.squares + other.squares,
            rows=self.rows + other.rows,
            signal_sums=self.signal_sums + other.signal_sums,
            signal_squares=self.signal_squares + other.signal_squares,
        )

    def scaled(self, factor: float) -> Self:
        """Return the sums with every weight multiplied by a factor."""
        return dataclasses.replace(
            self,
            sums=self.sums * factor,
            squares=self.squares * factor**2,
            signal_sums=self.signal_sums * factor,
            signal_squares=self.signal_squares * factor**2,
        )

    def kept(self, cells: NDArray[Any]) -> NDArray[Any]:
        """Return the sums over the rows kept by every cut: cumulative sums."""
        out = cells
        for position, axis in enumerate(self.axes):
            dimension = out.ndim - 2 + position
            if axis.keep is Keep.ABOVE:
                out = np.flip(out, dimension)
            out = np.cumsum(out, axis=dimension)
            if axis.keep is Keep.ABOVE:
                out = np.flip(out, dimension)
        return out


def accumulate_scan(
    table: EventTable,
    selected: NDArray[np.bool_],
    weight: FloatArray,
    axes: Sequence[ScanAxis],
) -> ScanSums:
    """Sum the rows of a table for a scan of one or two cuts.

    Parameters
    ----------
    table : EventTable
        Rows; of several samples if the weights make them one.
    selected : array of bool, shape (E,)
        Rows that pass everything but the cuts scanned.
    weight : array, shape (E,)
        Weights.
    axes : sequence of ScanAxis
        One or two observables and their cut values.

    Returns
    -------
    ScanSums
        Ready to be added to that of other rows.

    Raises
    ------
    StudyError
        If there are not one or two different axes.
    """
    axes = tuple(axes)
    names = [axis.observable for axis in axes]
    if len(axes) not in {1, 2} or len(set(names)) != len(names):
        msg = f"scan: one or two different observables are required; got {names}"
        raise StudyError(msg)
    weight = np.asarray(weight, dtype=np.float64)
    is_signal = table["is_signal"]
    half = np.where(table.in_half_a, 0, 1)
    true = table["cos_theta_true"] >= 0
    signal = np.flatnonzero(is_signal)
    hemisphere = (2 * half + true)[signal]

    rows = np.flatnonzero(selected)
    shape = (2, N_PATTERNS, len(axes[0].points), 1)
    cells = axes[0].cells(table[names[0]][rows])
    good = cells >= 0
    if len(axes) == 2:
        shape = (*shape[:3], len(axes[1].points))
        second = axes[1].cells(table[names[1]][rows])
        good &= second >= 0
        cells = cells * shape[3] + second
    forward = table["cos_theta_reco"][rows] >= 0
    pattern = np.where(is_signal[rows], 2 * true[rows], 4) + forward
    place = (half[rows] * N_PATTERNS + pattern) * (shape[2] * shape[3]) + cells
    place, w = place[good], weight[rows][good]
    size = int(np.prod(shape))
    signal_weight = weight[signal]
    return ScanSums(
        axes=axes,
        sums=_sums(place, w, size).reshape(shape),
        squares=_sums(place, w**2, size).reshape(shape),
        rows=np.bincount(place, minlength=size).reshape(shape),
        signal_sums=_sums(hemisphere, signal_weight, 4).reshape(2, 2),
        signal_squares=_sums(hemisphere, signal_weight**2, 4).reshape(2, 2),
    )


def _sums(place: NDArray[np.int64], weight: FloatArray, size: int) -> FloatArray:
    """Return sums of weights per place, as float64 even without rows."""
    return np.bincount(place, weight, size).astype(np.float64)
