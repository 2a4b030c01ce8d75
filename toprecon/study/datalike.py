"""The data-like view: what is seen of the selected events without truth.

Nothing here uses generated quantities. What the tail of the pairing score says of the
unmatched events is in :mod:`toprecon.study.tail`.
"""

from __future__ import annotations

import dataclasses
import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.events import Binning, EventTable, Observable, Sample, find_observable
from toprecon.statistics import Measured, asymmetry_from_counts, plain_number
from toprecon.study.distributions import TableMasks
from toprecon.study.plan import CutOptions, StudyPlan
from toprecon.study.sums import check_plan
from toprecon.study.weights import weighted_rows

FloatArray = NDArray[np.float64]

ANGLE = Observable(
    "cos_theta_reco",
    "",
    "reconstructed cos(theta) of the top",
    (-1.0, 1.0),
    "reconstructed cos θ of the top",
)
BINS = 40


@dataclasses.dataclass(frozen=True)
class DataLike:
    """An observable of the selected events, by process.

    Parameters
    ----------
    observable : Observable
        What is shown.
    binning : Binning
        Its bins.
    stack : dict of array, shape (B,)
        Expected events, or sums of generator weights, by group of samples.
    variances : dict of array, shape (B,)
        Of the simulation: sums of squared weights.
    outside : dict of float
        What lies outside the bins, by group of samples.
    is_expected : bool
        Whether the numbers are events expected at a luminosity.
    reason : str
        Why they are not; empty if they are.
    cut : CutOptions or None
        The cut on the observable, which is not applied here.
    asymmetry : Measured
        A_FB of the reconstructed angle of all selected events, all cuts applied.
    expected_error : float
        Its error in data of the expected size; NaN if that is not known.
    """

    observable: Observable
    binning: Binning
    stack: dict[str, FloatArray]
    variances: dict[str, FloatArray]
    outside: dict[str, float]
    is_expected: bool
    reason: str
    cut: CutOptions | None
    asymmetry: Measured
    expected_error: float

    @property
    def total(self) -> FloatArray:
        """Sum of the stack, shape (B,)."""
        return np.sum(list(self.stack.values()), axis=0)

    @property
    def variance(self) -> FloatArray:
        """Variance of the simulation, shape (B,)."""
        return np.sum(list(self.variances.values()), axis=0)

    def to_mapping(self) -> dict[str, Any]:
        """Return plain data; a missing number is ``None``."""
        return {
            "observable": self.observable.name,
            "edges": list(self.binning.edges),
            "stack": {n: v.tolist() for n, v in self.stack.items()},
            "variances": {n: v.tolist() for n, v in self.variances.items()},
            "outside": self.outside,
            "expected": self.is_expected,
            "reason": self.reason,
            "asymmetry": self.asymmetry.to_mapping(),
            "expected_error": plain_number(self.expected_error),
        }

    def __str__(self) -> str:
        kind = "expected events" if self.is_expected else "sum of weights"
        parts = ", ".join(
            f"{n} {_count(v.sum() + self.outside[n])}" for n, v in self.stack.items()
        )
        before, after = "", ""
        if self.cut:
            before, after = f" before the cut on {self.cut.observable}", " after it"
        text = (
            f"{kind} by process{before}: {parts}; observed A_FB{after} {self.asymmetry}"
        )
        if self.is_expected:
            return f"{text}, in data +- {self.expected_error:.4f}"
        return f"{text}; no expected numbers: {self.reason}"


def data_like(
    table: EventTable,
    plan: StudyPlan,
    observable: str = "pairing.chi2",
    *,
    binning: Binning | None = None,
    beams: str = "plan",
) -> DataLike:
    """Return an observable of the selected events as data would show it.

    Parameters
    ----------
    table : EventTable
        Made with the plan.
    plan : StudyPlan
        Cuts, beams and luminosity.
    observable : str
        A column of the table, or ``cos_theta_reco``. The cut on it is not applied.
    binning : Binning, optional
        40 bins over the usual range if absent; undefined values enter nowhere.
    beams : str
        ``"plan"``, ``"LR"`` or ``"RL"``.

    Returns
    -------
    DataLike
        Top pairs by kind of sample, other processes by name.
    """
    check_plan(table, plan)
    item = find_observable(observable, (*plan.observables, ANGLE))
    bins = binning or Binning.regular(BINS, *item.range)
    weight, factors = weighted_rows(table, plan.beams, beams)
    masks = TableMasks(table)
    values = table[observable].astype(np.float64)
    keep = masks.passing(plan, without=observable) & ~np.isnan(values)
    index = bins.digitise(values)
    stack: dict[str, FloatArray] = {}
    variances: dict[str, FloatArray] = {}
    outside: dict[str, float] = {}
    for number, sample in enumerate(table.samples):
        if factors.factors[sample.name] == 0:
            continue
        rows = np.flatnonzero(keep & (table["sample"] == number))
        name, n = _group(sample), len(bins)
        w, place = weight[rows], index[rows]
        inside = place >= 0
        outside[name] = outside.get(name, 0.0) + float(w[~inside].sum())
        for sums, what in ((stack, w), (variances, w * w)):
            counts = np.bincount(place[inside], what[inside], minlength=n)
            sums[name] = sums.get(name, np.zeros(n)) + counts
    selected = masks.passing(plan)
    forward = table["cos_theta_reco"] >= 0
    moments = [
        float((weight[selected & side] ** power).sum())
        for power in (1, 2)
        for side in (forward, ~forward)
    ]
    asymmetry = asymmetry_from_counts(*moments)
    total = moments[0] + moments[1]
    error = math.nan
    if factors.is_expected and total > 0:
        error = math.sqrt(max(1 - asymmetry.value**2, 0.0) / total)
    return DataLike(
        observable=item,
        binning=bins,
        stack=stack,
        variances=variances,
        outside=outside,
        is_expected=factors.is_expected,
        reason=factors.reason,
        cut=next((c for c in plan.active_cuts if c.observable == observable), None),
        asymmetry=asymmetry,
        expected_error=error,
    )


def _group(sample: Sample) -> str:
    """Name what is one thing to data: both helicities of a process and kind."""
    if not sample.is_signal_process:
        return sample.process
    return sample.name.removesuffix(f"_{sample.helicity.name}")


def _count(value: float) -> str:
    """Write a number of events: whole ones if there are many."""
    return f"{value:.0f}" if abs(value) >= 100 else f"{value:.3g}"
