"""What the results of a study would mean for a measurement."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

from toprecon.asymmetry import (
    BeamRun,
    BiasMeaning,
    HelicityObservables,
    helicity_observables,
    meaning_of,
)
from toprecon.errors import StudyError
from toprecon.study.weights import polarisations_of
from toprecon.treelevel import ElectroweakInputs

if TYPE_CHECKING:
    from toprecon.study.result import StudyResult


def bias_meaning(
    result: StudyResult, beams: str = "plan", *, quantity: str = "total_shift"
) -> BiasMeaning:
    """Express a shift of A_FB in expected errors and as shifts of couplings.

    Parameters
    ----------
    result : StudyResult
        A finished study.
    beams : str
        ``"plan"``, ``"LR"`` or ``"RL"``.
    quantity : str
        Shift of the asymmetry result: ``"total_shift"``, ``"shift"`` (the selected
        signal only) or ``"acceptance_shift"``.

    Returns
    -------
    BiasMeaning
        Standard deviations are missing without a luminosity and cross sections.

    Raises
    ------
    StudyError
        If there is no such sample, the beams are not known, or the signal has several
        energies.
    """
    pair = polarisations_of(beams)
    if beams == "plan":
        found = result.beams
        if not found.is_expected and len(result.by_helicity) == 1:
            # samples of one helicity: those are the beams
            (only,) = result.by_helicity
            pair = polarisations_of(only)
        elif not found.is_expected:
            msg = (
                "meaning of the bias: the mix of beams must be known; "
                f"{found.factors.reason}; or ask for the beams LR or RL"
            )
            raise StudyError(msg)
    elif beams in result.by_helicity:
        found = result.by_helicity[beams]
    else:
        msg = f"beams: a sample of helicity {beams} is required, but there is none"
        raise StudyError(msg)
    options = result.plan.beams
    return meaning_of(
        getattr(found.asymmetry, quantity),
        sqrt_s=_energy(result),
        polarisations=pair
        or (options.electron_polarisation, options.positron_polarisation),
        expected_error=(
            found.asymmetry.expected_error if found.is_expected else math.nan
        ),
        inputs=ElectroweakInputs(top_mass=result.plan.pairing.top_mass),
    )


def helicity_summary(
    result: StudyResult, runs: Sequence[BeamRun] | None = None
) -> HelicityObservables:
    """Predict cross sections and asymmetries of both helicities from polarised runs.

    Parameters
    ----------
    result : StudyResult
        With samples of both helicities, a luminosity and cross sections.
    runs : sequence of BeamRun, optional
        The luminosity of the plan, half of it with the polarisations of the plan and
        half with the opposite ones, if absent.

    Returns
    -------
    HelicityObservables
        sigma_L, sigma_R, A_L, A_R with their covariance, and A_LR.

    Raises
    ------
    StudyError
        If a helicity, the luminosity or a cross section is missing.
    """
    missing = [name for name in ("LR", "RL") if name not in result.by_helicity]
    if missing:
        msg = (
            "cross sections per helicity: samples of both helicities are required, but "
            f"there is none of {' and '.join(missing)}"
        )
        raise StudyError(msg)
    left, right = (result.by_helicity[name] for name in ("LR", "RL"))
    if not (left.is_expected and right.is_expected):
        msg = f"cross sections per helicity: {left.factors.reason}"
        raise StudyError(msg)
    beams = result.plan.beams
    if runs is None:
        runs = [
            BeamRun(
                electron_polarisation=sign * beams.electron_polarisation,
                positron_polarisation=sign * beams.positron_polarisation,
                luminosity=beams.luminosity / 2,
                electron_error=beams.electron_polarisation_error,
                positron_error=beams.positron_polarisation_error,
            )
            for sign in (1, -1)
        ]
    return helicity_observables(
        left.asymmetry, right.asymmetry, runs, luminosity=beams.luminosity
    )


def _energy(result: StudyResult) -> float:
    """Collision energy of the signal [GeV]."""
    energies = {s.sqrt_s for s in result.samples if s.is_signal_process}
    if len(energies) != 1 or not all(math.isfinite(x) for x in energies):
        msg = (
            "meaning of the bias: signal of one known collision energy is required; "
            f"got {sorted(energies)} GeV"
        )
        raise StudyError(msg)
    return energies.pop()
