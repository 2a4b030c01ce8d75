"""A_FB, classes, flips and the budget: all functions of the sums."""

from __future__ import annotations

import dataclasses
import math
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from toprecon.asymmetry.budget import (
    EVERYTHING,
    MATCHED,
    SELECTED,
    DistortionBudget,
    budget_of,
    coefficients,
)
from toprecon.asymmetry.estimators import (
    EstimatorOptions,
    EstimatorResult,
    estimate,
)
from toprecon.asymmetry.spectra import FLIP_BINS, AngleSpectra
from toprecon.asymmetry.state import (
    BACKGROUND,
    CHOSEN,
    CLOSEST,
    N_CATEGORIES,
    N_COMPONENTS,
    RECO,
    REJECTED,
    TRUE,
    TRUE_RECO,
    UNIT,
)
from toprecon.events import Binning, PairingClass
from toprecon.statistics import Estimate, Measured, fraction_from_counts, ratio

FloatArray = NDArray[np.float64]


@dataclasses.dataclass(frozen=True)
class ClassResult:
    """Selected signal events of one pairing class.

    Parameters
    ----------
    name : str
        Of :class:`~toprecon.events.PairingClass`, lower case.
    count : int
        Rows.
    share : Measured
        Share of the selected signal.
    generated, reconstructed : Measured
        A_FB of these events.
    shift : Measured
        Reconstructed minus generated, with the paired error.
    flipped : Measured
        Fraction whose hemisphere is reconstructed wrongly.
    """

    name: str
    count: int
    share: Measured
    generated: Measured
    reconstructed: Measured
    shift: Measured
    flipped: Measured


@dataclasses.dataclass(frozen=True)
class FlipResult:
    """Hemispheres reconstructed wrongly, selected signal.

    Parameters
    ----------
    forward_to_backward : Measured
        a, the probability that a forward top is reconstructed backward.
    backward_to_forward : Measured
        b, the other way round.
    slope : Measured
        1 - a - b: the response of A_FB to a change of the true one.
    offset : Measured
        b - a. A_FB(reco) = slope * A_FB(true) + offset, exactly.
    flipped : Measured
        Fraction of all.
    """

    forward_to_backward: Measured
    backward_to_forward: Measured
    slope: Measured
    offset: Measured
    flipped: Measured

    def __str__(self) -> str:
        return (
            f"a {self.forward_to_backward}, b {self.backward_to_forward}, "
            f"slope 1-a-b {self.slope}, offset b-a {self.offset}"
        )


@dataclasses.dataclass(frozen=True)
class Corrected:
    """A_FB of all generated signal that follows from an observed one.

    Parameters
    ----------
    value : float
        (observed - offset)/slope minus the shift of the acceptance.
    data_error : float
        Error of the observed value, over the slope.
    simulation_error : float
        From the errors of slope, offset and acceptance in the simulated sample.
    """

    value: float
    data_error: float
    simulation_error: float


class AsymmetryResult:
    """A_FB of the generated and the reconstructed angle, and what lies between.

    Errors are those of the simulated sample. Differences of variants of the same
    events have paired errors.

    Parameters
    ----------
    first : array, shape (C, 7)
        sum(w u) per category.
    second : array, shape (C, 7, 7)
        sum(w^2 u u^T) per category.
    counts : array of int, shape (C,)
        Rows per category.
    spectra : AngleSpectra
        Histograms of the angles.
    """

    def __init__(
        self,
        first: FloatArray,
        second: FloatArray,
        counts: NDArray[np.int64],
        spectra: AngleSpectra,
    ) -> None:
        self._first = first
        self._counts = counts
        self.spectra = spectra
        self._covariance = np.zeros((N_CATEGORIES * N_COMPONENTS,) * 2)
        for category in range(N_CATEGORIES):
            rows = slice(category * N_COMPONENTS, (category + 1) * N_COMPONENTS)
            self._covariance[rows, rows] = second[category]

    def _estimate(self, categories: tuple[int, ...], component: int) -> Estimate:
        return ratio(
            coefficients(categories, component),
            coefficients(categories, UNIT),
            self._first.ravel(),
        )

    def _measured(self, categories: tuple[int, ...], component: int) -> Measured:
        return self._estimate(categories, component).measured(self._covariance)

    @cached_property
    def generated(self) -> Measured:
        """A_FB of all signal events in the truth phase space, generated angle."""
        return self._measured((*SELECTED, REJECTED), TRUE)

    @cached_property
    def generated_selected(self) -> Measured:
        """A_FB of the selected signal events, generated angle."""
        return self._measured(SELECTED, TRUE)

    @cached_property
    def closest(self) -> Measured:
        """A_FB of matched selected events, jets of the generated quarks."""
        return self._measured(MATCHED, CLOSEST)

    @cached_property
    def chosen(self) -> Measured:
        """A_FB of the selected signal events, chosen jets with the true charge."""
        return self._measured(SELECTED, CHOSEN)

    @cached_property
    def reconstructed_signal(self) -> Measured:
        """A_FB of the selected signal events, reconstructed angle."""
        return self._measured(SELECTED, RECO)

    @cached_property
    def reconstructed(self) -> Measured:
        """A_FB of all selected events, background included, reconstructed angle."""
        return self._measured(EVERYTHING, RECO)

    @cached_property
    def shift(self) -> Measured:
        """Reconstructed minus generated of the same selected signal, paired error."""
        return self._difference((SELECTED, RECO), (SELECTED, TRUE))

    @cached_property
    def acceptance_shift(self) -> Measured:
        """Generated angle: selected signal minus all signal."""
        return self._difference((SELECTED, TRUE), ((*SELECTED, REJECTED), TRUE))

    @cached_property
    def total_shift(self) -> Measured:
        """Reconstructed (all selected) minus generated (all signal)."""
        return self._difference((EVERYTHING, RECO), ((*SELECTED, REJECTED), TRUE))

    def _difference(
        self, later: tuple[tuple[int, ...], int], earlier: tuple[tuple[int, ...], int]
    ) -> Measured:
        change = self._estimate(*later) - self._estimate(*earlier)
        return change.measured(self._covariance)

    @cached_property
    def efficiency(self) -> Measured:
        """Share of the signal in the truth phase space that is selected."""
        w = self._first[:, UNIT]
        v = np.diagonal(self._covariance)[UNIT::N_COMPONENTS]
        inside = list(SELECTED)
        return fraction_from_counts(
            w[inside].sum(), w[REJECTED], v[inside].sum(), v[REJECTED]
        )

    @property
    def selected_sum(self) -> float:
        """Sum of weights of all selected events."""
        return float(self._first[list(EVERYTHING), UNIT].sum())

    @property
    def signal_sum(self) -> float:
        """Sum of weights of the selected signal."""
        return float(self._first[list(SELECTED), UNIT].sum())

    @property
    def background_share(self) -> float:
        """Share of other processes in all selected events."""
        total = self.selected_sum
        return float(self._first[BACKGROUND, UNIT] / total) if total else math.nan

    @property
    def expected_error(self) -> float:
        """Error of the reconstructed A_FB in data of as many events as the sums.

        Meaningful only if the weights were scaled to a luminosity: sqrt((1 - A^2)/N).
        """
        n, a = self.selected_sum, self.reconstructed.value
        return math.sqrt((1 - a**2) / n) if n > 0 else math.nan

    @cached_property
    def by_class(self) -> dict[str, ClassResult]:
        """Results of every pairing class that occurs in the selected signal."""
        signal = self._first[list(SELECTED), UNIT].sum()
        second = np.diagonal(self._covariance)[UNIT::N_COMPONENTS]
        out = {}
        for item in PairingClass:
            if not self._counts[item]:
                continue
            weight = self._first[item, UNIT]
            one = (int(item),)
            rest_variance = second[list(SELECTED)].sum() - second[item]
            same = self._estimate(one, TRUE_RECO).measured(self._covariance)
            out[item.name.lower()] = ClassResult(
                name=item.name.lower(),
                count=int(self._counts[item]),
                share=fraction_from_counts(
                    weight, signal - weight, second[item], max(rest_variance, 0.0)
                ),
                generated=self._measured(one, TRUE),
                reconstructed=self._measured(one, RECO),
                shift=self._difference((one, RECO), (one, TRUE)),
                flipped=Measured(0.5 * (1 - same.value), 0.5 * same.error),
            )
        return out

    @cached_property
    def fraction_right(self) -> Measured:
        """Share of correct ones among selected signal events that can be correct.

        Paired jets: matched events. Fat jets: all of them, those that leak included.
        """
        w = self._first[:, UNIT]
        v = np.diagonal(self._covariance)[UNIT::N_COMPONENTS]
        wrong = [PairingClass.B_SWAPPED, PairingClass.W_MIXED, PairingClass.LEAKING]
        right = PairingClass.CORRECT
        return fraction_from_counts(w[right], w[wrong].sum(), v[right], v[wrong].sum())

    @cached_property
    def flips(self) -> FlipResult:
        """Flip probabilities of the selected signal; exact for signs of +-1."""
        a, b, flipped = self._flips
        one = Estimate.constant(1.0, len(a.gradient))
        return FlipResult(
            a.measured(self._covariance),
            b.measured(self._covariance),
            (one - a - b).measured(self._covariance),
            (b - a).measured(self._covariance),
            flipped.measured(self._covariance),
        )

    @property
    def _flips(self) -> tuple[Estimate, Estimate, Estimate]:
        """Forward to backward, backward to forward, and the fraction of all."""
        x = self._first.ravel()
        unit, t, r, tr = (
            coefficients(SELECTED, c) for c in (UNIT, TRUE, RECO, TRUE_RECO)
        )
        return (
            ratio(unit + t - r - tr, 2 * (unit + t), x),
            ratio(unit - t + r - tr, 2 * (unit - t), x),
            ratio(unit - tr, 2 * unit, x),
        )

    def corrected(self, observed: Measured) -> Corrected:
        """Correct an observed A_FB of the signal for flips and acceptance.

        Parameters
        ----------
        observed : Measured
            Of selected signal, background already subtracted.

        Returns
        -------
        Corrected
            Right on average only if data flip as the simulation does.
        """
        a, b, _ = self._flips
        size = len(a.gradient)
        slope = Estimate.constant(1.0, size) - a - b
        acceptance = self._estimate(SELECTED, TRUE) - self._estimate(
            (*SELECTED, REJECTED), TRUE
        )
        found = (Estimate.constant(observed.value, size) - (b - a)) / slope - acceptance
        return Corrected(
            value=found.value,
            data_error=abs(observed.error / slope.value) if slope.value else math.nan,
            simulation_error=found.measured(self._covariance).error,
        )

    def estimators(
        self,
        options: EstimatorOptions | None = None,
        *,
        spectrum: str = "reconstructed",
    ) -> EstimatorResult:
        """Return A_FB by counting and by a fit, see :func:`estimate`."""
        return estimate(self.spectra, options, spectrum=spectrum)

    @property
    def flip_bins(self) -> Binning:
        """Bins of |cos(theta)| of :attr:`flip_fractions`."""
        return FLIP_BINS

    @cached_property
    def flip_fractions(self) -> tuple[Measured, ...]:
        """Fraction flipped per bin of the generated |cos(theta)|, selected signal."""
        kept, flipped = self.spectra.flips.sum(axis=0)
        kept_v, flipped_v = self.spectra.flips_variances.sum(axis=0)
        cells = zip(flipped, kept, flipped_v, kept_v, strict=True)
        return tuple(fraction_from_counts(*cell) for cell in cells)

    @cached_property
    def budget(self) -> DistortionBudget:
        """The distortion budget."""
        return budget_of(self._first, self._covariance)
