"""What the errors of the polarimeters do to the results for the plan's beams."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Sequence

from toprecon.asymmetry import AsymmetryResult, AsymmetrySums
from toprecon.study.plan import BeamsOptions
from toprecon.study.sums import SampleSums
from toprecon.study.weights import SampleFactors, sample_factors

QUANTITIES = (
    "generated",
    "generated_selected",
    "reconstructed_signal",
    "reconstructed",
    "shift",
    "total_shift",
    "efficiency",
)
"""Numbers of an asymmetry result whose dependence is given."""

_STEP = 1e-4  # a ratio of linear functions: central differences are good to 1e-8


@dataclasses.dataclass(frozen=True)
class PolarisationEffect:
    """How results depend on the polarisations of the beams.

    Parameters
    ----------
    electron, positron : dict of float
        Derivatives by each polarisation, by the names of :data:`QUANTITIES`.
    electron_error, positron_error : float
        Errors of the polarisations, taken as independent.
    """

    electron: dict[str, float]
    positron: dict[str, float]
    electron_error: float
    positron_error: float

    def error(self, name: str) -> float:
        """Return the error of one quantity that the polarisations cause.

        Parameters
        ----------
        name : str
            Of :data:`QUANTITIES`.

        Returns
        -------
        float
            To be added to the statistical error in quadrature.
        """
        return math.hypot(
            self.electron[name] * self.electron_error,
            self.positron[name] * self.positron_error,
        )


def polarisation_effect(
    parts: Sequence[SampleSums], beams: BeamsOptions
) -> PolarisationEffect | None:
    """Work out how results depend on the polarisations.

    Parameters
    ----------
    parts : sequence of SampleSums
        Sums of every sample.
    beams : BeamsOptions
        Polarisations and their errors.

    Returns
    -------
    PolarisationEffect or None
        None without a luminosity or cross sections: the mix is not known then.
    """
    samples = [part.sample for part in parts]
    if not sample_factors(samples, beams).is_expected:
        return None
    pair = (beams.electron_polarisation, beams.positron_polarisation)
    derivatives = []
    for index in (0, 1):
        ends = []
        for sign in (1, -1):
            moved = list(pair)
            moved[index] = min(1.0, max(-1.0, pair[index] + sign * _STEP))
            factors = sample_factors(samples, beams, polarisations=(moved[0], moved[1]))
            ends.append((moved[index], asymmetry_of(parts, factors)))
        (high, later), (low, earlier) = ends
        derivatives.append(
            {
                name: (getattr(later, name).value - getattr(earlier, name).value)
                / (high - low)
                for name in QUANTITIES
            }
        )
    by_electron, by_positron = derivatives
    return PolarisationEffect(
        by_electron,
        by_positron,
        beams.electron_polarisation_error,
        beams.positron_polarisation_error,
    )


def asymmetry_of(
    parts: Sequence[SampleSums], factors: SampleFactors
) -> AsymmetryResult:
    """Return the asymmetry of all samples, each times its factor.

    Parameters
    ----------
    parts : sequence of SampleSums
        Sums of every sample.
    factors : SampleFactors
        Of these samples.

    Returns
    -------
    AsymmetryResult
        Of the sum.
    """
    total: AsymmetrySums | None = None
    for part in parts:
        scaled = part.asymmetry.scaled(factors.factors[part.sample.name])
        total = scaled if total is None else total + scaled
    assert total is not None  # a study has at least one sample
    return total.result()
