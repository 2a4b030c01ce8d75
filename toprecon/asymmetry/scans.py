"""Scans of cuts: what a cut costs, what it cures, what it spoils.

The best point is chosen on half A of the events and quoted on half B, so that the
number quoted is not the luckiest of thousands.
"""

from __future__ import annotations

import dataclasses
from enum import StrEnum
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.asymmetry.scan_sums import Cut, ScanAxis, ScanSums
from toprecon.errors import StudyError
from toprecon.options import Options, option
from toprecon.statistics import Measured, fraction_from_counts

FloatArray = NDArray[np.float64]


class Bias(StrEnum):
    """What counts as bias of a measured A_FB."""

    TOTAL = "total"
    SHIFT = "shift"


class ScanOptions(Options):
    """How the points of a scan are judged."""

    bias: Bias = option(
        Bias.TOTAL,
        "bias: to A_FB of all generated signal ('total'), or of the selected ('shift')",
    )
    residual: float = option(
        1.0, "share of the bias that is left after a correction", low=0, high=1
    )
    smallest_efficiency: float = option(
        0.0, "points of a smaller efficiency are not considered", low=0, high=1
    )
    fewest_rows: int = option(
        100, "points with fewer selected rows in either half are not considered", low=1
    )


@dataclasses.dataclass(frozen=True)
class ScanValues:
    """Quantities at every point of the grid, arrays of shape (N, M).

    Parameters
    ----------
    efficiency : array
        Share of the signal in the truth phase space that is kept.
    selected_sum, signal_sum : array
        Sums of weights kept: all, and signal only.
    rows : array of int
        Rows kept.
    generated_selected, reconstructed : array
        A_FB of the signal kept (generated angle) and of all that is kept.
    shift, shift_error : array
        Signal kept: reconstructed minus generated, paired error.
    total_shift, total_shift_error : array
        Reconstructed (all that is kept) minus generated (all signal).
    forward_to_backward, backward_to_forward, slope, offset : array
        Flip probabilities a and b, 1 - a - b and b - a.
    effective_events : array
        Signal times slope squared: unflipped events that would weigh as much.
    expected_error : array
        sqrt((1 - A^2)/N) of the reconstructed A_FB; meaningful if the weights are
        expected events.
    bias, bias_error, squared_bias, total_error : array
        See :class:`ScanOptions`. ``squared_bias`` is bias^2 minus its variance, an
        unbiased estimate that may be negative; ``total_error`` adds what is positive
        of it to the expected error in quadrature.
    """

    efficiency: FloatArray
    selected_sum: FloatArray
    signal_sum: FloatArray
    rows: NDArray[np.int64]
    generated_selected: FloatArray
    reconstructed: FloatArray
    shift: FloatArray
    shift_error: FloatArray
    total_shift: FloatArray
    total_shift_error: FloatArray
    forward_to_backward: FloatArray
    backward_to_forward: FloatArray
    slope: FloatArray
    offset: FloatArray
    effective_events: FloatArray
    expected_error: FloatArray
    bias: FloatArray
    bias_error: FloatArray
    squared_bias: FloatArray
    total_error: FloatArray


@dataclasses.dataclass(frozen=True)
class ScanPoint:
    """One point, chosen on half A and quoted on half B.

    Parameters
    ----------
    index : tuple of int
        Position in the grid.
    cuts : tuple
        (observable, low, high) for each axis, as ``StudyPlan.with_cut`` takes them.
    efficiency, bias : Measured
        On half B.
    bias_when_chosen : Measured
        On half A: too good, as it was chosen.
    expected_error, total_error, effective_events : float
        On half B, scaled to all events.
    """

    index: tuple[int, int]
    cuts: tuple[Cut, ...]
    efficiency: Measured
    bias: Measured
    bias_when_chosen: Measured
    expected_error: float
    total_error: float
    effective_events: float

    def __str__(self) -> str:
        parts = []
        for name, low, high in self.cuts:
            parts.append(f"{name} < {high:g}" if low is None else f"{name} >= {low:g}")
        return f"{', '.join(parts)}: efficiency {self.efficiency}, bias {self.bias}"


class ScanResult:
    """A scan of one or two cuts.

    Parameters
    ----------
    sums : ScanSums
        Sums per cell.
    options : ScanOptions, optional
        How points are judged.
    """

    def __init__(self, sums: ScanSums, options: ScanOptions | None = None) -> None:
        self.axes: tuple[ScanAxis, ...] = sums.axes
        self.options = options or ScanOptions()
        self._sums = sums

    @cached_property
    def everything(self) -> ScanValues:
        """Values of all events."""
        return _values(self._sums, slice(None), self.options)

    @cached_property
    def half_a(self) -> ScanValues:
        """Values of half A, sums scaled to all events."""
        return _values(self._sums, slice(0, 1), self.options)

    @cached_property
    def half_b(self) -> ScanValues:
        """Values of half B, sums scaled to all events."""
        return _values(self._sums, slice(1, 2), self.options)

    @cached_property
    def is_considered(self) -> NDArray[np.bool_]:
        """Points that may be chosen, shape (N, M)."""
        return (
            (self.half_a.rows >= self.options.fewest_rows)
            & (self.half_b.rows >= self.options.fewest_rows)
            & (self.everything.efficiency >= self.options.smallest_efficiency)
            & np.isfinite(self.half_a.total_error)
        )

    @cached_property
    def is_on_front(self) -> NDArray[np.bool_]:
        """Pareto front, shape (N, M): no other point keeps more at a smaller bias."""
        return self.front("bias")

    def front(self, cost: str) -> NDArray[np.bool_]:
        """Return the points that no other beats in both efficiency and a cost.

        Parameters
        ----------
        cost : str
            Field of :class:`ScanValues`; its absolute value is to be small.

        Returns
        -------
        array of bool, shape (N, M)
            On all events, among the points considered.
        """
        values = np.abs(getattr(self.everything, cost)).ravel()
        efficiency = self.everything.efficiency.ravel()
        out = np.zeros(len(values), dtype=bool)
        points = np.flatnonzero(self.is_considered.ravel() & np.isfinite(values))
        # most efficient first; of equals, the cheapest first
        order = points[np.lexsort((values[points], -efficiency[points]))]
        least = np.inf
        for point in order:
            if values[point] < least:
                out[point] = True
                least = values[point]
        return out.reshape(self.everything.bias.shape)

    @cached_property
    def best(self) -> ScanPoint:
        """The point of the smallest total error on half A, quoted on half B.

        Raises
        ------
        StudyError
            If no point may be considered.
        """
        if not self.is_considered.any():
            msg = (
                "scan: a point with enough events is required, but none has an "
                f"efficiency of at least {self.options.smallest_efficiency:g} and "
                f"{self.options.fewest_rows} rows in each half; loosen these limits or "
                "choose other cut values"
            )
            raise StudyError(msg)
        cost = np.where(self.is_considered, self.half_a.total_error, np.inf)
        row, column = np.unravel_index(int(np.argmin(cost)), cost.shape)
        return self.point(int(row), int(column))

    def point(self, row: int, column: int = 0) -> ScanPoint:
        """Return one point of the grid, quoted on half B.

        Parameters
        ----------
        row, column : int
            Position along the first and the second axis.

        Returns
        -------
        ScanPoint
            With its cuts.
        """
        at = (row, column)
        a, b = self.half_a, self.half_b
        kept = self._sums.kept(self._sums.sums)[1, :4, row, column].sum()
        squares = self._sums.kept(self._sums.squares)[1, :4, row, column].sum()
        whole = self._sums.signal_sums[1].sum()
        rest = self._sums.signal_squares[1].sum() - squares
        return ScanPoint(
            index=at,
            cuts=tuple(axis.cut(i) for axis, i in zip(self.axes, at, strict=False)),
            efficiency=fraction_from_counts(
                float(kept), float(whole - kept), float(squares), max(float(rest), 0.0)
            ),
            bias=Measured(float(b.bias[at]), float(b.bias_error[at])),
            bias_when_chosen=Measured(float(a.bias[at]), float(a.bias_error[at])),
            expected_error=float(b.expected_error[at]),
            total_error=float(b.total_error[at]),
            effective_events=float(b.effective_events[at]),
        )


def _values(sums: ScanSums, halves: Any, options: ScanOptions) -> ScanValues:
    """Work out all quantities of some halves at every point."""
    with np.errstate(invalid="ignore", divide="ignore"):
        return _all_values(sums, halves, options)


def _all_values(sums: ScanSums, halves: Any, options: ScanOptions) -> ScanValues:
    """As :func:`_values`; empty points give NaN."""
    bb, bf, fb, ff, ob, of = sums.kept(sums.sums)[halves].sum(axis=0)
    qbb, qbf, qfb, qff, qob, qof = sums.kept(sums.squares)[halves].sum(axis=0)
    total_b, total_f = sums.signal_sums[halves].sum(axis=0)
    # a half stands for all events
    whole = sums.signal_sums.sum() / (total_b + total_f)
    square_b, square_f = sums.signal_squares[halves].sum(axis=0)
    signal, everything = bb + bf + fb + ff, bb + bf + fb + ff + ob + of
    all_signal = total_b + total_f
    a_all = (total_f - total_b) / all_signal
    a_true = (fb + ff - bb - bf) / signal
    a_signal = (bf + ff - bb - fb) / signal
    a_reco = (bf + ff + of - bb - fb - ob) / everything
    # sums of squared weights times products of signs
    q, q_t, q_r, q_tr = (
        qbb + qbf + qfb + qff,
        qfb + qff - qbb - qbf,
        qbf + qff - qbb - qfb,
        qbb + qff - qbf - qfb,
    )
    shift = a_signal - a_true
    shift_variance = (
        2 * q - 2 * q_tr - 2 * shift * (q_r - q_t) + shift**2 * q
    ) / signal**2
    generated_variance = (
        (1 + a_all**2) * (square_b + square_f) - 2 * a_all * (square_f - square_b)
    ) / all_signal**2
    all_q, all_q_r = q + qob + qof, q_r + qof - qob
    reco_variance = ((1 + a_reco**2) * all_q - 2 * a_reco * all_q_r) / everything**2
    common = (q_tr - a_all * q_r - a_reco * q_t + a_all * a_reco * q) / (
        everything * all_signal
    )
    total_variance = generated_variance + reco_variance - 2 * common
    a, b = fb / (fb + ff), bf / (bb + bf)
    slope = 1 - a - b
    expected = np.sqrt((1 - a_reco**2) / (everything * whole))
    is_total = options.bias is Bias.TOTAL
    bias = a_reco - a_all if is_total else shift
    variance = np.maximum(total_variance if is_total else shift_variance, 0.0)
    squared = bias**2 - variance
    left = options.residual**2 * np.maximum(squared, 0.0)
    return ScanValues(
        efficiency=signal / all_signal,
        selected_sum=everything * whole,
        signal_sum=signal * whole,
        rows=sums.kept(sums.rows)[halves].sum(axis=(0, 1)),
        generated_selected=a_true,
        reconstructed=a_reco,
        shift=shift,
        shift_error=np.sqrt(np.maximum(shift_variance, 0.0)),
        total_shift=a_reco - a_all,
        total_shift_error=np.sqrt(np.maximum(total_variance, 0.0)),
        forward_to_backward=a,
        backward_to_forward=b,
        slope=slope,
        offset=b - a,
        effective_events=signal * whole * slope**2,
        expected_error=expected,
        bias=bias,
        bias_error=np.sqrt(variance),
        squared_bias=squared,
        total_error=np.sqrt(expected**2 + left),
    )
