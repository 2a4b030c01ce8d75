"""Does the correction work? Closure on halves of the events.

The response comes from half A of the events (by identity), the spectrum to be
corrected from half B. The residual is corrected minus generated of the *same* half B;
its error is paired: an event of half B that is generated and found in the right bins
moves both. Half A enters through the derivatives of the unfolding by every cell of
its matrix.
"""

from __future__ import annotations

import dataclasses
import warnings

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import NotClosingWarning, StudyError
from toprecon.events import EventTable
from toprecon.migration.influence import (
    corrected_influence,
    generated_influence,
    response_derivatives,
    unfold_block,
)
from toprecon.migration.matrix import MigrationMatrix, accumulate_half
from toprecon.migration.options import MigrationOptions
from toprecon.migration.unfolding import Unfolded, UnfoldingOptions
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
    half = table.in_half_a
    weight = np.asarray(weight, dtype=np.float64)
    return (
        accumulate_half(table, selected, weight, half, options),
        accumulate_half(table, selected, weight, ~half, options),
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
    found, fixed = unfold_block(response, block, variances, options)
    corrected = corrected_influence(found, block.shape)
    generated = generated_influence(block.shape)
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
