"""Does the correction work? Closure on halves, and linearity for other truths.

The response comes from half A of the events (by identity), the spectrum to be
corrected from half B. The residual is corrected minus generated of the *same* half B;
its error is paired: an event of half B that is generated and found in the right bins
moves both. Half A enters through the derivatives of the unfolding by every cell of
its matrix.
"""

from __future__ import annotations

import dataclasses
import warnings
from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import NotClosingWarning, StudyError
from toprecon.events import EventTable
from toprecon.migration.matrix import MigrationMatrix, accumulate, cells_of
from toprecon.migration.options import MigrationOptions
from toprecon.migration.unfolding import Method, Unfolded, UnfoldingOptions, unfold
from toprecon.resampling import in_half_a
from toprecon.statistics import Measured, asymmetry_of_spectrum

FloatArray = NDArray[np.float64]

ALARM = 1e-4
"""Probability below which a closure warns."""


@dataclasses.dataclass(frozen=True)
class ClosureResult:
    """Corrected against generated spectrum of half B.

    Parameters
    ----------
    unfolded : Unfolded
        The corrected spectrum.
    generated : array, shape (T,)
        The truth of the same events.
    residual : array, shape (T,)
        Corrected minus generated.
    covariance : array, shape (T, T)
        Of the residual: paired fluctuations of half B and those of half A.
    asymmetry_generated, asymmetry_corrected : Measured
        A_FB of both spectra, each with its own error.
    asymmetry_residual : Measured
        Their difference with the paired error.
    """

    unfolded: Unfolded
    generated: FloatArray
    residual: FloatArray
    covariance: FloatArray
    asymmetry_generated: Measured
    asymmetry_corrected: Measured
    asymmetry_residual: Measured

    @property
    def pulls(self) -> FloatArray:
        """Residuals over their errors, shape (T,)."""
        with np.errstate(invalid="ignore", divide="ignore"):
            return self.residual / np.sqrt(np.diagonal(self.covariance))

    @property
    def chi2(self) -> float:
        """Chi-square of all residuals against 0."""
        inverse = np.linalg.pinv(self.covariance, rcond=1e-10, hermitian=True)
        return float(self.residual @ inverse @ self.residual)

    @property
    def degrees(self) -> int:
        """Independent residuals."""
        return int(np.linalg.matrix_rank(self.covariance, tol=None, hermitian=True))

    @property
    def probability(self) -> float:
        """Probability of a larger chi-square if the correction is right on average."""
        from scipy.stats import chi2

        return float(chi2.sf(self.chi2, self.degrees)) if self.degrees else 1.0

    def __str__(self) -> str:
        return (
            f"closure: A_FB corrected minus generated {self.asymmetry_residual}, "
            f"chi2 {self.chi2:.1f} for {self.degrees} bins"
        )


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


def accumulate_halves(
    table: EventTable,
    selected: NDArray[np.bool_],
    weight: FloatArray,
    options: MigrationOptions | None = None,
) -> tuple[MigrationMatrix, MigrationMatrix]:
    """Fill the matrices of half A and half B.

    Parameters
    ----------
    table : EventTable
        Rows.
    selected : array of bool, shape (E,)
        Rows that pass everything.
    weight : array, shape (E,)
        Weights.
    options : MigrationOptions, optional
        Bins.

    Returns
    -------
    tuple of MigrationMatrix
        Each can be added to that of other rows.
    """
    half = in_half_a(table["id"])
    weight = np.asarray(weight, dtype=np.float64)
    return (
        accumulate(table, selected, np.where(half, weight, 0.0), options),
        accumulate(table, selected, np.where(half, 0.0, weight), options),
    )


def check_closure(
    response: MigrationMatrix,
    data: MigrationMatrix,
    options: UnfoldingOptions | None = None,
) -> ClosureResult:
    """Correct one sample with the response of another and compare with its truth.

    Parameters
    ----------
    response : MigrationMatrix
        Of half A.
    data : MigrationMatrix
        Of half B, which shares no event with the other.
    options : UnfoldingOptions, optional
        Method.

    Returns
    -------
    ClosureResult
        Warns if the residuals are very improbable.

    Raises
    ------
    StudyError
        If the bins differ or cannot be unfolded.
    """
    if (response.true_binning, response.reco_binning) != (
        data.true_binning,
        data.reco_binning,
    ):
        msg = "closure: equal bins are required in both halves; got different ones"
        raise StudyError(msg)
    block, variances = data.blocks()
    found, fixed = _unfold_block(response, block, variances, options)
    corrected = _corrected_influence(found, block.shape)
    generated = _generated_influence(block.shape)
    t = len(data.true_binning)
    apart = (corrected - generated).reshape(t, -1)
    by_response = response_derivatives(response, data.reconstructed, fixed)
    _, response_variances = response.blocks()
    of_response = (by_response * response_variances.ravel()) @ by_response.T
    covariance = (apart * variances.ravel()) @ apart.T + of_response
    edges = data.true_binning.array
    truth = asymmetry_of_spectrum(data.generated, edges)
    guess = asymmetry_of_spectrum(found.values, edges)
    paired = np.tensordot(guess.gradient, corrected, 1) - np.tensordot(
        truth.gradient, generated, 1
    )
    variance = (paired**2 * variances).sum()
    variance += guess.gradient @ of_response @ guess.gradient
    result = ClosureResult(
        unfolded=found,
        generated=data.generated,
        residual=found.values - data.generated,
        covariance=covariance,
        asymmetry_generated=truth.measured(np.diag(data.generated_variances)),
        asymmetry_corrected=guess.measured(found.covariance + of_response),
        asymmetry_residual=Measured(
            guess.value - truth.value, float(np.sqrt(variance))
        ),
    )
    if result.probability < ALARM:
        warnings.warn(
            f"{result}; probability {result.probability:.1e}: the correction does not "
            "give back the truth of the simulation; regularise less or take more events",
            NotClosingWarning,
            stacklevel=2,
        )
    return result


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
    _, fixed = _unfold_block(response, block, variances, unfolding)
    half_b = ~in_half_a(table["id"])
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
        found, _ = _unfold_block(response, weighted, fill((w * ratio) ** 2), fixed)
        truth = asymmetry_of_spectrum(generated, edges)
        guess = asymmetry_of_spectrum(found.values, edges)
        data_side.append(
            np.tensordot(guess.gradient, _corrected_influence(found, shape), 1)
            - np.tensordot(truth.gradient, _generated_influence(shape), 1)
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


def response_derivatives(
    response: MigrationMatrix, data: FloatArray, options: UnfoldingOptions
) -> FloatArray:
    """Return derivatives of the corrected spectrum by every cell of the response.

    Parameters
    ----------
    response : MigrationMatrix
        The matrix used for the correction.
    data : array, shape (R,)
        Spectrum corrected.
    options : UnfoldingOptions
        Method, with a fixed strength.

    Returns
    -------
    array, shape (T, (T + 2) (R + 1))
        Central differences, cells as in :meth:`MigrationMatrix.blocks`. They include
        all that depends on the simulation: response, efficiency, fakes, background,
        and the starting point of the iterations.
    """
    block, variances = response.blocks()
    t, r = response.counts.shape
    out = np.zeros((t, *block.shape))
    # a small part of a typical row: far above rounding, far below curvature
    step = 1e-4 * response.generated.mean()
    for row, column in np.ndindex(*block.shape):
        if row >= t and column == r:
            continue
        moved = []
        for sign in (1, -1):
            changed = block.copy()
            changed[row, column] += sign * step
            matrix = MigrationMatrix.from_blocks(
                response.true_binning, response.reco_binning, changed, variances
            )
            moved.append(unfold(matrix, data, options).values)
        out[:, row, column] = (moved[0] - moved[1]) / (2 * step)
    return out.reshape(t, -1)


def _unfold_block(
    response: MigrationMatrix,
    block: FloatArray,
    variances: FloatArray,
    options: UnfoldingOptions | None,
) -> tuple[Unfolded, UnfoldingOptions]:
    """Unfold the spectrum of a block; also return the options with fixed strength."""
    options = options or UnfoldingOptions()
    data = block[:, :-1].sum(axis=0)
    errors = variances[:, :-1].sum(axis=0)
    found = unfold(response, data, options, covariance=errors)
    if options.method is Method.TIKHONOV:
        options = options.replace(strength=found.strength)
    return found, options


def _corrected_influence(found: Unfolded, shape: tuple[int, ...]) -> FloatArray:
    """Change of the corrected spectrum per unit of weight in each cell."""
    out = np.zeros((len(found.values), *shape))
    out[:, :, :-1] = found.gradient[:, None, :]
    return out


def _generated_influence(shape: tuple[int, ...]) -> FloatArray:
    """Change of the generated spectrum per unit of weight in each cell."""
    t = shape[0] - 2
    out = np.zeros((t, *shape))
    for row in range(t):
        out[row, row, :] = 1.0
    return out


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
