"""What a bias of A_FB would mean: in expected errors, and for the couplings."""

from __future__ import annotations

import dataclasses
import math

from toprecon.statistics import Measured
from toprecon.treelevel import ElectroweakInputs, FormFactors, polarised_terms

COUPLINGS = {
    "f1v_photon": "vector coupling to the photon",
    "f1v_z": "vector coupling to the Z",
    "f1a_z": "axial coupling to the Z",
    "f2v_photon": "magnetic coupling to the photon",
    "f2v_z": "weak magnetic coupling to the Z",
}
"""CP-even form factors that A_FB depends on; gauge invariance fixes f1a_photon at 0."""

CAUTION = (
    "tree level without radiation, one coupling at a time, all others as in the "
    "standard model; an order of magnitude, not a measurement"
)
"""What a coupling shift rests on."""

_STEP = 1e-4  # A_FB is smooth: central differences are good to about 1e-8


@dataclasses.dataclass(frozen=True)
class CouplingShift:
    """The change of one coupling that would shift A_FB as much as a bias does.

    Parameters
    ----------
    name : str
        Key of :data:`COUPLINGS`.
    derivative : float
        dA_FB/dF at the standard model, this energy and these beams.
    shift : Measured
        Change of the form factor.
    relative : float
        The same over its value in the standard model; NaN where that is 0.
    """

    name: str
    derivative: float
    shift: Measured
    relative: float


@dataclasses.dataclass(frozen=True)
class BiasMeaning:
    """A bias of A_FB in other units.

    Parameters
    ----------
    bias : Measured
        Of A_FB, with the error of the simulated sample.
    expected_error : float
        Error of A_FB in the expected data; NaN if not stated.
    standard_deviations : Measured
        Bias over expected error.
    couplings : dict of CouplingShift
        By name.
    """

    bias: Measured
    expected_error: float
    standard_deviations: Measured
    couplings: dict[str, CouplingShift]

    caution = CAUTION

    def __str__(self) -> str:
        lines = [f"bias {self.bias}"]
        if math.isfinite(self.expected_error):
            lines[0] += (
                f", {self.standard_deviations} standard deviations of the expected data "
                f"({self.expected_error:.4f})"
            )
        lines += [
            f"  as a change of {name}: {item.shift}"
            for name, item in self.couplings.items()
        ]
        lines.append(f"  ({self.caution})")
        return "\n".join(lines)


def asymmetry_derivative(
    coupling: str,
    sqrt_s: float,
    electron_polarisation: float,
    positron_polarisation: float,
    inputs: ElectroweakInputs | None = None,
) -> float:
    """Return dA_FB/dF at tree level.

    Parameters
    ----------
    coupling : str
        Key of :data:`COUPLINGS`.
    sqrt_s : float
        Energy of the pair [GeV].
    electron_polarisation, positron_polarisation : float
        In [-1, 1]; > 0 is right-handed.
    inputs : ElectroweakInputs, optional
        Couplings and masses.

    Returns
    -------
    float
        At the standard model; NaN at and below the threshold.
    """
    beams = (electron_polarisation, positron_polarisation)
    values = []
    for sign in (1, -1):
        shifted = FormFactors().shifted(inputs, **{coupling: sign * _STEP})
        terms = polarised_terms(sqrt_s, *beams, inputs, shifted)
        values.append(float(terms.asymmetry))
    return (values[0] - values[1]) / (2 * _STEP)


def meaning_of(
    bias: Measured,
    *,
    sqrt_s: float,
    polarisations: tuple[float, float],
    expected_error: float = math.nan,
    inputs: ElectroweakInputs | None = None,
) -> BiasMeaning:
    """Express a bias of A_FB in expected errors and as shifts of couplings.

    Parameters
    ----------
    bias : Measured
        Of A_FB, such as a shift of the budget.
    sqrt_s : float
        Energy of the pair [GeV].
    polarisations : tuple of float
        Of the electron and the positron beam; (-1, 1) for pure e-L e+R.
    expected_error : float
        Error of A_FB in the expected data.
    inputs : ElectroweakInputs, optional
        Couplings and masses.

    Returns
    -------
    BiasMeaning
        Read :data:`CAUTION` before quoting a coupling.
    """
    standard_model = FormFactors.standard_model(inputs)
    couplings = {}
    for name in COUPLINGS:
        derivative = asymmetry_derivative(name, sqrt_s, *polarisations, inputs)
        shift = _over(bias, derivative)
        value = getattr(standard_model, name)
        relative = shift.value / value if value else math.nan
        couplings[name] = CouplingShift(name, derivative, shift, relative)
    return BiasMeaning(bias, expected_error, _over(bias, expected_error), couplings)


def _over(bias: Measured, unit: float) -> Measured:
    """Divide a number by a unit; NaN if that is missing or 0."""
    if not math.isfinite(unit) or unit == 0:
        return Measured(math.nan, math.nan)
    return Measured(bias.value / unit, bias.error / abs(unit))
