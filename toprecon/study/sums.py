"""Mergeable sums: all that a result needs, one set per sample.

Generator weights go in; factors for luminosity and beams are applied at the end,
because the sum of weights of a whole sample is known only then. Adding the sums of
chunks in sorted order gives the same bits for any order in which they were made.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from typing import Self

import numpy as np
from numpy.typing import NDArray

from toprecon.asymmetry import AsymmetrySums
from toprecon.asymmetry import accumulate as accumulate_asymmetry
from toprecon.errors import StudyError
from toprecon.events import CutFlow, EventTable, Sample, Status
from toprecon.io import ChunkRef
from toprecon.migration import MigrationMatrix, accumulate_half
from toprecon.migration import accumulate as accumulate_migration
from toprecon.study.cutting import apply_cuts
from toprecon.study.plan import StudyPlan


@dataclasses.dataclass(frozen=True)
class SampleSums:
    """Sums over the rows of one sample, with generator weights.

    Parameters
    ----------
    sample : Sample
        Description; entries and sum of weights belong to the rows summed.
    cut_flow : CutFlow
        Selection steps, reconstruction and cuts.
    asymmetry : AsymmetrySums
        State of the asymmetry and its distortion.
    migration : MigrationMatrix
        Matrix with everything beside it.
    half_a : MigrationMatrix
        The same of half A of the events, for the closure.
    statuses : array of int, shape (S,)
        Rows by :class:`~toprecon.events.Status`, of those that pass the selection.
    undefined : dict of int
        By cut: rows lost because the observable is NaN.
    """

    sample: Sample
    cut_flow: CutFlow
    asymmetry: AsymmetrySums
    migration: MigrationMatrix
    half_a: MigrationMatrix
    statuses: NDArray[np.int64]
    undefined: dict[str, int]

    def __add__(self, other: Self) -> Self:
        names = {**self.undefined, **other.undefined}
        return dataclasses.replace(
            self,
            sample=self.sample.merged(other.sample),
            cut_flow=self.cut_flow + other.cut_flow,
            asymmetry=self.asymmetry + other.asymmetry,
            migration=self.migration + other.migration,
            half_a=self.half_a + other.half_a,
            statuses=self.statuses + other.statuses,
            undefined={
                name: self.undefined.get(name, 0) + other.undefined.get(name, 0)
                for name in names
            },
        )


@dataclasses.dataclass(frozen=True)
class StudySums:
    """Sums of a study, by the name of the sample.

    Parameters
    ----------
    plan_hash : str
        Hash of the plan they were made with.
    samples : dict of SampleSums
        One entry per sample.
    """

    plan_hash: str
    samples: dict[str, SampleSums]

    def __add__(self, other: Self) -> Self:
        if self.plan_hash != other.plan_hash:
            msg = "study sums: made with different plans; they cannot be added"
            raise StudyError(msg)
        samples = dict(self.samples)
        for name, sums in other.samples.items():
            samples[name] = samples[name] + sums if name in samples else sums
        return dataclasses.replace(self, samples=samples)


def summarise(table: EventTable, plan: StudyPlan) -> StudySums:
    """Sum a table, or a part of it, sample by sample.

    Parameters
    ----------
    table : EventTable
        Made with the reconstruct part of the same plan.
    plan : StudyPlan
        Cuts and bins.

    Returns
    -------
    StudySums
        Ready to be added to those of other chunks.

    Raises
    ------
    StudyError
        If the table was made with other settings.
    """
    check_plan(table, plan)
    cutting = apply_cuts(table, plan)
    samples = {}
    for rows, part in table.by_sample:
        (sample,) = part.samples
        stage = cutting.stage[rows]
        selected = stage == 0
        weight = part["weight"]
        passed = part["stage"] == 0
        samples[sample.name] = SampleSums(
            sample=sample,
            cut_flow=CutFlow.from_stage(stage, weight, cutting.steps),
            asymmetry=accumulate_asymmetry(part, selected, weight),
            migration=accumulate_migration(part, selected, weight, plan.migration),
            half_a=accumulate_half(
                part, selected, weight, part.in_half_a, plan.migration
            ),
            statuses=np.bincount(part["status"][passed], minlength=len(Status)),
            undefined=_undefined(table, rows, stage, plan),
        )
    return StudySums(plan.hash, samples)


def merge(sums: Mapping[ChunkRef, StudySums]) -> StudySums:
    """Add the sums of chunks in the sorted order of the chunks.

    Parameters
    ----------
    sums : mapping of ChunkRef to StudySums
        In any order.

    Returns
    -------
    StudySums
        Bit-equal for any order of completion.

    Raises
    ------
    StudyError
        If there are none.
    """
    ordered = [sums[ref] for ref in sorted(sums)]
    if not ordered:
        msg = "study: at least one event is required; the files hold none"
        raise StudyError(msg)
    total = ordered[0]
    for part in ordered[1:]:
        total = total + part
    return total


def check_plan(table: EventTable, plan: StudyPlan) -> None:
    """Check that a table was made with the reconstruct part of a plan.

    Parameters
    ----------
    table : EventTable
        A table.
    plan : StudyPlan
        A plan.

    Raises
    ------
    StudyError
        If not; the message names the sections that differ.
    """
    known = table.provenance.get("plan_hash")
    if known is None or known == plan.reconstruct_hash:
        return
    old, new = table.provenance.get("plan", {}), plan.reconstruct_settings
    sections = [name for name in new if old.get(name) != new[name]]
    msg = (
        "event table: must be made with the settings of this plan, but the sections "
        f"{', '.join(sections) or 'of the plan'} differ; reconstruct the events again"
    )
    raise StudyError(msg)


def _undefined(
    table: EventTable,
    rows: NDArray[np.intp],
    stage: NDArray[np.uint8],
    plan: StudyPlan,
) -> dict[str, int]:
    """Rows lost at each cut because its observable is NaN."""
    first = len(table.stages) + 2  # stage of the first cut, after the reconstruction
    return {
        cut.observable: int(
            np.count_nonzero(
                np.isnan(table[cut.observable][rows[stage == first + position]])
            )
        )
        for position, cut in enumerate(plan.active_cuts)
    }
