"""Linearity: how a correction follows a truth that differs from the simulation."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import StudyError
from toprecon.events import EventTable
from toprecon.migration.closure import accumulate_halves
from toprecon.migration.influence import (
    corrected_influence,
    generated_influence,
    response_derivatives,
    unfold_block,
)
from toprecon.migration.matrix import cells_of
from toprecon.migration.options import MigrationOptions
from toprecon.migration.unfolding import UnfoldingOptions
from toprecon.statistics import Measured, asymmetry_of_spectrum

FloatArray = NDArray[np.float64]


@dataclasses.dataclass(frozen=True)
class LinearityResult:
    """A_FB corrected against generated for other truths.

    Parameters
    ----------
    names : tuple of str
        Of the K truths.
    generated, corrected : array, shape (K,)
        A_FB of half B, weighted to each truth.
    residual : array, shape (K,)
        Corrected minus generated.
    covariance : array, shape (K, K)
        Of the residuals, with what the truths have in common.
    slope, offset : Measured
        Of a straight line corrected = slope generated + offset; NaN unless there are
        two different truths.
    """

    names: tuple[str, ...]
    generated: FloatArray
    corrected: FloatArray
    residual: FloatArray
    covariance: FloatArray
    slope: Measured
    offset: Measured

    def __getitem__(self, name: str) -> Measured:
        """Residual of one truth with its paired error."""
        k = self.names.index(name)
        variance = max(float(self.covariance[k, k]), 0.0)
        return Measured(float(self.residual[k]), float(np.sqrt(variance)))

    def __str__(self) -> str:
        lines = [f"{'truth':<24}{'generated':>12}{'corrected - generated':>26}"]
        lines += [
            f"{name:<24}{value:>12.4f}{self[name]!s:>26}"
            for name, value in zip(self.names, self.generated, strict=True)
        ]
        lines.append(
            f"corrected = slope x generated + offset: slope {self.slope}, "
            f"offset {self.offset}"
        )
        return "\n".join(lines)

    def difference(self, name: str, reference: str) -> Measured:
        """Return how much the residual of one truth exceeds that of another.

        Parameters
        ----------
        name, reference : str
            Of ``names``.

        Returns
        -------
        Measured
            What the two have in common drops out: the model dependence alone.
        """
        k, m = self.names.index(name), self.names.index(reference)
        c = self.covariance
        variance = max(float(c[k, k] + c[m, m] - 2 * c[k, m]), 0.0)
        return Measured(
            float(self.residual[k] - self.residual[m]), float(np.sqrt(variance))
        )


def check_linearity(
    table: EventTable,
    selected: NDArray[np.bool_],
    weight: FloatArray,
    ratios: Mapping[str, FloatArray],
    options: MigrationOptions | None = None,
    unfolding: UnfoldingOptions | None = None,
) -> LinearityResult:
    """Correct half B, weighted to other truths, with the unweighted half A.

    Parameters
    ----------
    table : EventTable
        Rows.
    selected : array of bool, shape (E,)
        Rows that pass everything.
    weight : array, shape (E,)
        Weights of the simulation.
    ratios : mapping of array, shape (E,)
        Other truth over simulated truth for every row, by name: ratios of d sigma / d
        cos(theta) or of matrix elements. Used for signal rows of the signal process;
        other processes keep their weight.
    options : MigrationOptions, optional
        Bins.
    unfolding : UnfoldingOptions, optional
        Method; an automatic strength is chosen once, for the simulated truth.

    Returns
    -------
    LinearityResult
        One residual per truth. For an angle-only change slope 1 and offset 0 are
        expected; for other couplings the residual is the model dependence.

    Raises
    ------
    StudyError
        If a ratio is missing or of the wrong length.
    """
    options = options or MigrationOptions()
    weight = np.asarray(weight, dtype=np.float64)
    response, nominal = accumulate_halves(table, selected, weight, options)
    block, variances = nominal.blocks()
    _, fixed = unfold_block(response, block, variances, unfolding)
    half_b = ~table.in_half_a
    cell, shape = cells_of(table.take(half_b), selected[half_b], options)
    process = table.is_signal_process[half_b]
    factors = {n: _ratio(n, x, table, half_b, process) for n, x in ratios.items()}
    w = weight[half_b]
    # rows that are in no bin at all: not signal, not reconstructed
    t = len(options.true_binning)
    counted = ~((cell // shape[1] >= t) & (cell % shape[1] == shape[1] - 1))

    def fill(values: FloatArray) -> FloatArray:
        size = shape[0] * shape[1]
        sums = np.bincount(cell[counted], values[counted], minlength=size)
        return sums.astype(np.float64).reshape(shape)

    _, response_variances = response.blocks()
    edges = options.true_binning.array
    data_side, response_side, truths, guesses = [], [], [], []
    for ratio in factors.values():
        weighted = fill(w * ratio)
        generated = weighted[:t].sum(axis=1)
        found, _ = unfold_block(response, weighted, fill((w * ratio) ** 2), fixed)
        truth = asymmetry_of_spectrum(generated, edges)
        guess = asymmetry_of_spectrum(found.values, edges)
        data_side.append(
            np.tensordot(guess.gradient, corrected_influence(found, shape), 1)
            - np.tensordot(truth.gradient, generated_influence(shape), 1)
        )
        reconstructed = weighted[:, :-1].sum(axis=0)
        by_response = response_derivatives(response, reconstructed, fixed)
        response_side.append(guess.gradient @ by_response)
        truths.append(truth.value)
        guesses.append(guess.value)
    k = len(factors)
    covariance = np.zeros((k, k))
    for i, first in enumerate(factors.values()):
        for j, second in enumerate(factors.values()):
            squares = fill(w**2 * first * second)
            covariance[i, j] = (data_side[i] * data_side[j] * squares).sum() + (
                response_side[i] * response_side[j] * response_variances.ravel()
            ).sum()
    x, y = np.array(truths), np.array(guesses)
    slope, offset = _straight_line(x, y - x, covariance)
    return LinearityResult(tuple(factors), x, y, y - x, covariance, slope, offset)


def _ratio(
    name: str,
    ratio: FloatArray,
    table: EventTable,
    half_b: NDArray[np.bool_],
    process: NDArray[np.bool_],
) -> FloatArray:
    """Check the weights of one truth and leave other processes alone."""
    values = np.asarray(ratio, dtype=np.float64)
    if values.shape != (len(table),):
        msg = (
            f"linearity: {name!r} must have one ratio for each of the {len(table)} "
            f"rows; got shape {values.shape}"
        )
        raise StudyError(msg)
    values = np.where(process, values[half_b], 1.0)
    if not np.isfinite(values).all():
        n = int((~np.isfinite(values)).sum())
        msg = (
            f"linearity: {name!r} must be finite for every event of the signal process; "
            f"{n} are not; do the events have their truth?"
        )
        raise StudyError(msg)
    return values


def _straight_line(
    x: FloatArray, residual: FloatArray, covariance: FloatArray
) -> tuple[Measured, Measured]:
    """Slope and offset of x + residual against x, unweighted, with errors."""
    spread = x - x.mean() if len(x) else x
    total = (spread**2).sum()
    if total < 1e-12:
        missing = Measured(float("nan"), float("nan"))
        return missing, missing
    of_slope = spread / total
    of_offset = np.full(len(x), 1 / len(x)) - of_slope * x.mean()
    values, errors = [], []
    for coefficients in (of_slope, of_offset):
        values.append(float(coefficients @ residual))
        errors.append(float(np.sqrt(coefficients @ covariance @ coefficients)))
    return Measured(1 + values[0], errors[0]), Measured(values[1], errors[1])
