"""Scan cuts of a study: one call from a table to the best point."""

from __future__ import annotations

import numpy as np

from toprecon.asymmetry import ScanAxis, ScanOptions, ScanResult, accumulate_scan
from toprecon.events import EventTable
from toprecon.study.cutting import apply_cuts
from toprecon.study.plan import StudyPlan
from toprecon.study.sums import check_plan
from toprecon.study.weights import weighted_rows


def scan_cuts(
    table: EventTable,
    plan: StudyPlan,
    *axes: ScanAxis,
    options: ScanOptions | None = None,
    beams: str = "plan",
) -> ScanResult:
    """Scan one or two cuts of a study.

    Parameters
    ----------
    table : EventTable
        Made with the reconstruct part of the plan.
    plan : StudyPlan
        Its other cuts stay; its cuts on the observables scanned are left out.
    *axes : ScanAxis
        One or two observables with their cut values.
    options : ScanOptions, optional
        How points are judged.
    beams : str
        ``"plan"``, ``"LR"`` or ``"RL"``.

    Returns
    -------
    ScanResult
        ``plan.with_cuts(result.best.cuts)`` takes the best point into the plan.
        Expected errors mean something only with a luminosity and cross sections.

    Examples
    --------
    A scan in one line::

        axis = ScanAxis.spread("pairing.chi2", table["pairing.chi2"])
        plan = plan.with_cuts(scan_cuts(table, plan, axis).best.cuts)
    """
    check_plan(table, plan)
    scanned = {axis.observable for axis in axes}
    others = tuple(cut for cut in plan.cuts if cut.observable not in scanned)
    loose = plan.replace(cuts=others)
    weight, factors = weighted_rows(table, plan.beams, beams)
    selected = apply_cuts(table, loose).selected
    if not all(factors.factors.values()):
        taken = np.array([factors.factors[s.name] > 0 for s in table.samples])
        selected = selected & taken[table["sample"]]
    return ScanResult(accumulate_scan(table, selected, weight, axes), options)
