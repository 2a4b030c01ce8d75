"""Which rows of an event table a plan keeps, and where the others were lost."""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import NDArray

from toprecon.events import EventTable, Status
from toprecon.study.plan import CutOptions, StudyPlan

RECONSTRUCTED_STEP = "pair reconstructed"


@dataclasses.dataclass(frozen=True)
class Cutting:
    """The fate of every row.

    Parameters
    ----------
    stage : array of int, shape (E,)
        0 if everything is passed, else 1 + index of the step that failed.
    steps : tuple of str
        Selection steps, the reconstruction itself, then the cuts.
    """

    stage: NDArray[np.uint8]
    steps: tuple[str, ...]

    @property
    def selected(self) -> NDArray[np.bool_]:
        """Rows that pass everything, shape (E,)."""
        return self.stage == 0


def passes_cut(table: EventTable, cut: CutOptions) -> NDArray[np.bool_]:
    """Return which rows pass one cut, shape (E,); low inclusive, high exclusive."""
    values = table[cut.observable].astype(np.float64)
    keep = ~np.isnan(values)  # an undefined value fails every cut
    if cut.low is not None:
        keep &= values >= cut.low
    if cut.high is not None:
        keep &= values < cut.high
    return keep


def is_reconstructed(table: EventTable) -> NDArray[np.bool_]:
    """Return which rows have a reconstructed pair and angle, shape (E,)."""
    return (table["status"] == Status.OK) & np.isfinite(table["cos_theta_reco"])


def apply_cuts(table: EventTable, plan: StudyPlan) -> Cutting:
    """Continue the cut flow of the selection with the cuts of the plan.

    Parameters
    ----------
    table : EventTable
        Made with the same plan.
    plan : StudyPlan
        Its active cuts are applied in order.

    Returns
    -------
    Cutting
        Stage of every row and names of the steps.
    """
    stage = table["stage"].copy()
    steps = [*table.stages, RECONSTRUCTED_STEP]
    stage[(stage == 0) & ~is_reconstructed(table)] = len(steps)
    for cut in plan.active_cuts:
        steps.append(cut.label)
        alive = stage == 0
        stage[alive & ~passes_cut(table, cut)] = len(steps)
    return Cutting(stage, tuple(steps))
