"""What a study gives: for the plan's beams, and for each beam helicity by itself."""

from __future__ import annotations

import dataclasses
import os
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from toprecon import __version__
from toprecon.asymmetry import AsymmetryResult, AsymmetrySums, EstimatorResult
from toprecon.errors import StudyError
from toprecon.events import CutFlow, Sample, Status
from toprecon.io import InputReport
from toprecon.migration import (
    ClosureResult,
    MigrationMatrix,
    UnfoldingOptions,
    check_closure,
)
from toprecon.study.plan import BranchChoice, StudyPlan
from toprecon.study.polarisation import PolarisationEffect, polarisation_effect
from toprecon.study.sums import SampleSums, StudySums
from toprecon.study.weights import PURE_BEAMS, SampleFactors, sample_factors

if TYPE_CHECKING:
    from toprecon.study.varying import VariationShifts

CAUTIONS = (
    "simulated events; statistical errors only, no systematic ones",
    "not for publication without the collaboration's approved tools",
)


@dataclasses.dataclass(frozen=True)
class BeamsResult:
    """Results for one setting of the beams.

    Parameters
    ----------
    name : str
        ``"LR"``, ``"RL"`` or ``"plan"`` (the beams of the plan).
    factors : SampleFactors
        What the generator weights of each sample were multiplied with.
    cut_flow : CutFlow
        All samples together.
    signal_cut_flow : CutFlow
        Top-pair samples only.
    asymmetry : AsymmetryResult
        A_FB and its distortion.
    migration : MigrationMatrix
        Generated against reconstructed angle.
    half_a : MigrationMatrix
        The same of half A of the events.
    polarisation : PolarisationEffect or None
        What the errors of the polarisations do; None if the plan states none, or if
        the mix of beams is not known.
    branch : BranchChoice
        How the pairs were reconstructed.
    """

    name: str
    factors: SampleFactors
    cut_flow: CutFlow
    signal_cut_flow: CutFlow
    asymmetry: AsymmetryResult
    migration: MigrationMatrix
    half_a: MigrationMatrix
    polarisation: PolarisationEffect | None = None
    branch: BranchChoice = BranchChoice.RESOLVED

    def closure(self, options: UnfoldingOptions | None = None) -> ClosureResult:
        """Correct half B with the response of half A.

        Parameters
        ----------
        options : UnfoldingOptions, optional
            Method; inversion if absent.

        Returns
        -------
        ClosureResult
            Residuals with paired errors.
        """
        return check_closure(self.half_a, self.migration.without(self.half_a), options)

    @property
    def is_expected(self) -> bool:
        """Whether sums are expected events at the luminosity of the plan."""
        return self.factors.is_expected


@dataclasses.dataclass(frozen=True)
class StudyResult:
    """Everything a study found.

    Parameters
    ----------
    plan : StudyPlan
        The plan.
    beams : BeamsResult
        For the beams of the plan; without luminosity or cross sections: all samples
        added with their generator weights.
    by_helicity : dict of BeamsResult
        For pure beams, by ``"LR"`` and ``"RL"``, as far as there are such samples.
    samples : tuple of Sample
        Descriptions with entries and sums of weights.
    statuses : dict of int
        Selected rows by :class:`~toprecon.events.Status`.
    undefined : dict of int
        By cut: rows lost because the observable is NaN.
    report : InputReport or None
        What was rejected while reading.
    inputs : dict of str
        Fingerprints of the files, by path.
    """

    plan: StudyPlan
    beams: BeamsResult
    by_helicity: dict[str, BeamsResult]
    samples: tuple[Sample, ...]
    statuses: dict[str, int]
    undefined: dict[str, int]
    report: InputReport | None = None
    inputs: dict[str, str] = dataclasses.field(default_factory=dict)

    @property
    def cut_flow(self) -> CutFlow:
        """Cut flow for the beams of the plan."""
        return self.beams.cut_flow

    @property
    def asymmetry(self) -> AsymmetryResult:
        """A_FB and its distortion for the beams of the plan."""
        return self.beams.asymmetry

    @property
    def estimators(self) -> EstimatorResult:
        """A_FB by counting and by a fit in the range of the plan, its beams."""
        return self.asymmetry.estimators(self.plan.asymmetry)

    @property
    def by_class(self) -> Any:
        """Share and A_FB of every pairing class, for the beams of the plan."""
        return self.beams.asymmetry.by_class

    @property
    def migration(self) -> MigrationMatrix:
        """Migration matrix for the beams of the plan."""
        return self.beams.migration

    @property
    def cautions(self) -> tuple[str, ...]:
        """What the numbers rest on, in few words."""
        reason = self.beams.factors.reason
        missing = (f"no expected numbers: {reason}",) if reason else ()
        return (*CAUTIONS, *missing)

    def hand_off(
        self,
        folder: str | os.PathLike[str],
        *,
        replace: bool = False,
        variations: VariationShifts | None = None,
    ) -> Path:
        """Write the hand-off folder, complete or not at all.

        Parameters
        ----------
        folder : path
            New folder; see :mod:`toprecon.study.handoff` for its content.
        replace : bool
            Whether an existing hand-off folder may be replaced.
        variations : VariationShifts, optional
            How the results shift if the input is varied, to go with them.

        Returns
        -------
        Path
            The folder.
        """
        from toprecon.study.handoff import write_hand_off

        return write_hand_off(self, folder, replace=replace, variations=variations)

    def to_mapping(self) -> dict[str, Any]:
        """Return the numbers as plain data, for JSON."""
        from toprecon.study.report import result_mapping

        return result_mapping(self)

    def __str__(self) -> str:
        a = self.asymmetry
        return (
            f"{self.plan.study.name}: A_FB generated {a.generated}, of selected "
            f"{a.generated_selected}, reconstructed {a.reconstructed}"
        )


def finish(
    sums: StudySums,
    plan: StudyPlan,
    *,
    report: InputReport | None = None,
    inputs: dict[str, str] | None = None,
) -> StudyResult:
    """Turn sums into results.

    Parameters
    ----------
    sums : StudySums
        Of all chunks.
    plan : StudyPlan
        The plan they were made with.
    report : InputReport, optional
        What was rejected while reading.
    inputs : dict, optional
        Fingerprints of the files.

    Returns
    -------
    StudyResult
        For the plan's beams and for each helicity.

    Raises
    ------
    StudyError
        If there is no event at all, or none is left by selection and cuts.
    """
    if sums.plan_hash != plan.hash:
        msg = "study sums: made with another plan; summarise the table again"
        raise StudyError(msg)
    parts = list(sums.samples.values())
    samples = tuple(part.sample for part in parts)
    _check_not_empty(parts)
    by_helicity = {}
    for helicity, polarisations in PURE_BEAMS.items():
        if any(s.helicity is helicity for s in samples):
            factors = sample_factors(samples, plan.beams, polarisations=polarisations)
            by_helicity[helicity.name] = _combine(helicity.name, parts, factors, plan)
    undefined: dict[str, int] = {}
    for part in parts:
        for name, count in part.undefined.items():
            undefined[name] = undefined.get(name, 0) + count
    statuses = np.sum([part.statuses for part in parts], axis=0)
    return StudyResult(
        plan=plan,
        beams=_with_polarisation(
            _combine("plan", parts, sample_factors(samples, plan.beams), plan),
            parts,
            plan,
        ),
        by_helicity=by_helicity,
        samples=samples,
        statuses={s.name.lower(): int(statuses[s]) for s in Status if statuses[s]},
        undefined=undefined,
        report=report,
        inputs=inputs or {},
    )


def _combine(
    name: str, parts: list[SampleSums], factors: SampleFactors, plan: StudyPlan
) -> BeamsResult:
    """Add the scaled sums of all samples."""
    used = [part for part in parts if factors.factors[part.sample.name] > 0] or parts
    scaled = [(part, factors.factors[part.sample.name]) for part in used]
    first, factor = scaled[0]
    asymmetry: AsymmetrySums = first.asymmetry.scaled(factor)
    migration = first.migration.scaled(factor)
    half_a = first.half_a.scaled(factor)
    cut_flow = first.cut_flow.scaled(factor)
    for part, factor in scaled[1:]:
        asymmetry = asymmetry + part.asymmetry.scaled(factor)
        migration = migration + part.migration.scaled(factor)
        half_a = half_a + part.half_a.scaled(factor)
        cut_flow = cut_flow + part.cut_flow.scaled(factor)
    signal = [item for item in scaled if item[0].sample.is_signal_process] or scaled
    signal_cut_flow = signal[0][0].cut_flow.scaled(signal[0][1])
    for part, factor in signal[1:]:
        signal_cut_flow = signal_cut_flow + part.cut_flow.scaled(factor)
    return BeamsResult(
        name,
        factors,
        cut_flow,
        signal_cut_flow,
        asymmetry.result(),
        migration,
        half_a,
        branch=plan.study.branch,
    )


def _with_polarisation(
    beams: BeamsResult, parts: list[SampleSums], plan: StudyPlan
) -> BeamsResult:
    """Add what the errors of the polarisations do, if the plan states any."""
    options = plan.beams
    if not (options.electron_polarisation_error or options.positron_polarisation_error):
        return beams
    return dataclasses.replace(beams, polarisation=polarisation_effect(parts, options))


def _check_not_empty(parts: list[SampleSums]) -> None:
    """Refuse a study without events, naming the step that lost the last one."""
    total = sum(int(part.cut_flow.counts[0]) for part in parts)
    if total == 0:
        msg = "study: at least one event is required; the files hold none"
        raise StudyError(msg)
    counts = np.sum([part.cut_flow.counts for part in parts], axis=0)
    if counts[-1] == 0:
        step = parts[0].cut_flow.steps[int(np.argmin(counts > 0))]
        msg = (
            f"study: at least one selected event is required, but the step {step!r} "
            f"leaves none of {total}; loosen it, or check that the files suit the "
            "channel of the plan"
        )
        raise StudyError(msg)


def provenance_of(result: StudyResult) -> dict[str, Any]:
    """Return where a result comes from, as plain data."""
    return {
        "program": "toprecon",
        "version": __version__,
        "plan_hash": result.plan.hash,
        "reconstruct_hash": result.plan.reconstruct_hash,
        "inputs": result.inputs,
        "samples": [sample.to_mapping() for sample in result.samples],
        "factors": result.beams.factors.factors,
        "cautions": list(result.cautions),
    }
