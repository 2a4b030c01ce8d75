"""From generator weights to the expected data: luminosity, cross section, beams.

One factor per sample turns its generator weights into expected events:
L * sigma_eff(P) / S, with S the sum of generator weights over all entries of the
sample. Without a luminosity or a cross section the factor is 1 and every expected
number is missing.
"""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import OptionError, StudyError
from toprecon.events import EventTable, Helicity, Sample
from toprecon.study.plan import BeamsOptions
from toprecon.treelevel import beam_fractions

PURE_BEAMS = {Helicity.LR: (-1.0, 1.0), Helicity.RL: (1.0, -1.0)}
"""Polarisations (electron, positron) of fully polarised beams."""


@dataclasses.dataclass(frozen=True)
class SampleFactors:
    """One factor per sample.

    Parameters
    ----------
    factors : dict of float
        By the name of the sample; 0 drops the sample from this mix of beams.
    is_expected : bool
        Whether the weighted sums are expected events at a luminosity.
    reason : str
        Why they are not; empty if they are.
    """

    factors: dict[str, float]
    is_expected: bool
    reason: str = ""


def sample_factors(
    samples: Sequence[Sample],
    beams: BeamsOptions,
    *,
    polarisations: tuple[float, float] | None = None,
) -> SampleFactors:
    """Return the factor of every sample for one mix of beams.

    Parameters
    ----------
    samples : sequence of Sample
        With cross sections [fb] and sums of weights.
    beams : BeamsOptions
        Polarisations and luminosity [fb^-1].
    polarisations : tuple of float, optional
        Electron and positron polarisation instead of those of ``beams``, for the
        result of pure beams.

    Returns
    -------
    SampleFactors
        Factors 1 (or 0 for the other helicity of pure beams) where a luminosity or
        cross section is missing.

    Raises
    ------
    StudyError
        If an unpolarised sample is to enter a polarised mix without a cross section
        per helicity.

    Notes
    -----
    sigma(P-, P+) = w_LR sigma_LR + w_RL sigma_RL, see
    :func:`toprecon.treelevel.beam_fractions`; beams of equal helicity contribute
    nothing to an exchange of vector bosons.
    """
    pair = polarisations or (beams.electron_polarisation, beams.positron_polarisation)
    reason = _why_not_expected(samples, beams)
    if reason:
        fractions = beam_fractions(*pair)
        drop = polarisations is not None
        return SampleFactors(
            {s.name: float(not (drop and _is_absent(s, fractions))) for s in samples},
            is_expected=False,
            reason=reason,
        )
    factors = {}
    for sample in samples:
        norm = sample.normalisation
        sigma = effective_cross_section(sample, *pair)
        factors[sample.name] = beams.luminosity * sigma / norm if norm else 0.0
    return SampleFactors(factors, is_expected=True)


def polarisations_of(name: str) -> tuple[float, float] | None:
    """Return the polarisations of named beams, or nothing for those of the plan.

    Parameters
    ----------
    name : str
        ``"plan"``, ``"LR"`` or ``"RL"``.

    Returns
    -------
    tuple of float or None
        Electron and positron; to be given to :func:`sample_factors`.

    Raises
    ------
    OptionError
        If there are no beams of this name.
    """
    pure = {helicity.name: pair for helicity, pair in PURE_BEAMS.items()}
    if name != "plan" and name not in pure:
        msg = f"beams: must be one of plan, {', '.join(pure)}; got {name!r}"
        raise OptionError(msg)
    return pure.get(name)


def weighted_rows(
    table: EventTable, beams: BeamsOptions, name: str = "plan"
) -> tuple[NDArray[np.float64], SampleFactors]:
    """Return the weight of every row for named beams.

    Parameters
    ----------
    table : EventTable
        Rows of all samples.
    beams : BeamsOptions
        Of the plan.
    name : str
        ``"plan"``, ``"LR"`` or ``"RL"``.

    Returns
    -------
    tuple
        Weights, shape (E,), 0 for samples that these beams leave out; and the factors.
    """
    factors = sample_factors(table.samples, beams, polarisations=polarisations_of(name))
    per_sample = np.array([factors.factors[s.name] for s in table.samples])
    return table["weight"] * per_sample[table["sample"]], factors


def effective_cross_section(
    sample: Sample, electron_polarisation: float, positron_polarisation: float
) -> float:
    """Return what a sample contributes to the cross section of polarised beams [fb].

    Parameters
    ----------
    sample : Sample
        With its cross sections.
    electron_polarisation, positron_polarisation : float
        Beam polarisations, > 0 right-handed.

    Returns
    -------
    float
        Cross section [fb].

    Raises
    ------
    StudyError
        If an unpolarised sample has no cross section per helicity.
    """
    w_lr, w_rl = beam_fractions(electron_polarisation, positron_polarisation)
    if sample.helicity is Helicity.LR:
        return w_lr * sample.cross_section_lr
    if sample.helicity is Helicity.RL:
        return w_rl * sample.cross_section_rl
    stated = (sample.electron_polarisation, sample.positron_polarisation)
    if (electron_polarisation, positron_polarisation) == stated and math.isfinite(
        sample.cross_section
    ):
        return sample.cross_section
    if math.isfinite(sample.cross_section_lr) and math.isfinite(
        sample.cross_section_rl
    ):
        return w_lr * sample.cross_section_lr + w_rl * sample.cross_section_rl
    msg = (
        f"sample {sample.name!r}: its cross section per helicity is required to mix it "
        f"into beams of polarisation {electron_polarisation:g}, "
        f"{positron_polarisation:g}, but the catalogue states none; add "
        "cross_section_lr and cross_section_rl"
    )
    raise StudyError(msg)


def _why_not_expected(samples: Sequence[Sample], beams: BeamsOptions) -> str:
    """Return the reason why no expected numbers can be given, or nothing."""
    if beams.luminosity <= 0:
        return "the plan states no luminosity"
    for sample in samples:
        known = (
            sample.cross_section_lr,
            sample.cross_section_rl,
            sample.cross_section,
        )
        needed = {Helicity.LR: known[0], Helicity.RL: known[1]}.get(sample.helicity)
        if needed is None:
            needed = max((x for x in known if math.isfinite(x)), default=math.nan)
        if math.isnan(needed):
            return f"sample {sample.name!r} has no cross section"
    return ""


def _is_absent(sample: Sample, fractions: tuple[float, float]) -> bool:
    """Whether pure beams leave a sample out."""
    if sample.helicity is Helicity.LR:
        return fractions[0] == 0
    if sample.helicity is Helicity.RL:
        return fractions[1] == 0
    return False
