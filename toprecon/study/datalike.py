"""The data-like view: what is seen without truth, and what its tail says of the pairing.

Nothing here uses generated quantities for what it shows; where truth is there, it is put
beside the outcome as a check.
"""

from __future__ import annotations

import dataclasses
import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import StudyError
from toprecon.events import (
    Binning,
    EventTable,
    Observable,
    PairingClass,
    Sample,
    find_observable,
)
from toprecon.statistics import Measured, asymmetry_from_counts, fit_templates
from toprecon.study.distributions import TableMasks
from toprecon.study.plan import CutOptions, StudyPlan
from toprecon.study.sums import check_plan
from toprecon.study.weights import weighted_rows

FloatArray = NDArray[np.float64]
BoolArray = NDArray[np.bool_]

ANGLE = Observable(
    "cos_theta_reco",
    "",
    "reconstructed cos(theta) of the top",
    (-1.0, 1.0),
    "reconstructed cos θ of the top",
)
BINS = 40
TAIL_BINS = 20
LEAST_PER_BIN = 25
"""Effective events per bin of the fit to the tail."""

_MATCHED = (PairingClass.CORRECT, PairingClass.B_SWAPPED, PairingClass.W_MIXED)


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
            "expected_error": (
                self.expected_error if math.isfinite(self.expected_error) else None
            ),
        }

    def __str__(self) -> str:
        kind = "expected events" if self.is_expected else "sum of weights"
        parts = ", ".join(
            f"{n} {v.sum() + self.outside[n]:.6g}" for n, v in self.stack.items()
        )
        text = f"{kind} by process: {parts}; observed A_FB {self.asymmetry}"
        if self.is_expected:
            return f"{text}, in data +- {self.expected_error:.4f}"
        return f"{text}; no expected numbers: {self.reason}"


@dataclasses.dataclass(frozen=True)
class TailFraction:
    """The unmatched share of the signal, from the shape of the pairing score.

    Parameters
    ----------
    unmatched : Measured
        Share of unmatched events in the selected signal, from the fit.
    true : Measured
        The same from truth, of the events fitted; NaN without truth.
    beyond : Measured
        Share of all events fitted with a score of at least ``place``.
    place : float
        The score that a tenth of the matched events exceed.
    binning : Binning
        Bins of the fit; the last one is open.
    data, expected : array, shape (B,)
        What was fitted, and the fit.
    parts : dict of array, shape (B,)
        ``matched``, ``unmatched`` and ``other`` as fitted.
    chi2 : float
        Of the fit.
    degrees : int
        Its degrees of freedom.
    """

    unmatched: Measured
    true: Measured
    beyond: Measured
    place: float
    binning: Binning
    data: FloatArray
    expected: FloatArray
    parts: dict[str, FloatArray]
    chi2: float
    degrees: int

    @property
    def pull(self) -> float:
        """Fitted minus true over the error of the fit; NaN without truth."""
        return (self.unmatched.value - self.true.value) / self.unmatched.error

    def __str__(self) -> str:
        check = (
            "no truth to check it with"
            if math.isnan(self.true.value)
            else f"from truth {self.true}"
        )
        return (
            f"unmatched share of the signal from the shape of the pairing score "
            f"{self.unmatched}, {check}; {self.beyond} of the events have a score of at "
            f"least {self.place:.3g} (fit: chi2 {self.chi2:.1f} for {self.degrees} "
            "degrees of freedom)"
        )


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


def unmatched_from_tail(
    table: EventTable,
    plan: StudyPlan,
    *,
    data: EventTable | None = None,
    observable: str = "pairing.chi2",
    beams: str = "plan",
    background_error: float = 0.0,
) -> TailFraction:
    """Fit the unmatched share of the signal to the distribution of the pairing score.

    Matched events pair up well, unmatched ones fill the tail. Templates of both come
    from half A of the simulated signal, and what else is selected (signal process
    outside the truth phase space, other processes) is taken from there too.

    Parameters
    ----------
    table : EventTable
        Simulated events with truth.
    plan : StudyPlan
        Cuts (but that on the observable), beams, luminosity.
    data : EventTable, optional
        Events to be fitted, without need of truth; half B of the table if absent.
    observable : str
        A column of the table.
    beams : str
        ``"plan"``, ``"LR"`` or ``"RL"``.
    background_error : float
        Relative error of what is held fixed.

    Returns
    -------
    TailFraction
        With the share from truth beside it, where there is truth.

    Raises
    ------
    StudyError
        If half A has no matched or no unmatched events.
    """
    check_plan(table, plan)
    weight, _ = weighted_rows(table, plan.beams, beams)
    value, keep, kind = _kinds(table, plan, observable)
    half_a = table.in_half_a
    fit = keep & half_a & (weight != 0)
    for name, code in (("matched", 0), ("unmatched", 1)):
        if not (fit & (kind == code)).any():
            msg = (
                f"tail: {name} signal events with truth are required in half A for a "
                "template; got none; give simulated top pairs with truth"
            )
            raise StudyError(msg)
    edges = _edges(value[fit], weight[fit])
    n = len(edges) - 1

    def histogram(rows: BoolArray, x: FloatArray, w: FloatArray) -> FloatArray:
        place = np.clip(np.searchsorted(edges, x[rows], side="right") - 1, 0, n - 1)
        return np.bincount(place, w[rows], minlength=n).astype(np.float64)

    sums = [histogram(fit & (kind == k), value, weight) for k in range(3)]
    squares = [histogram(fit & (kind == k), value, weight**2) for k in range(3)]
    for number in range(len(table.samples)):
        # a bin without events of a large weight is not known to have none
        rows = fit & (kind == 2) & (table["sample"] == number)
        if rows.any():
            squares[2] = squares[2] + float((weight[rows] ** 2).mean())
    if data is None:
        seen, seen_value, seen_weight, seen_kind = keep & ~half_a, value, weight, kind
        scale = weight[~half_a].sum() / weight[half_a].sum()
    else:
        check_plan(data, plan)
        seen_weight, _ = weighted_rows(data, plan.beams, beams)
        seen_value, seen, seen_kind = _kinds(data, plan, observable)
        scale = weight.sum() / weight[half_a].sum()
    counts = histogram(seen, seen_value, seen_weight)
    found = fit_templates(
        counts,
        sums[:2],
        squares[:2],
        fixed=scale * sums[2],
        fixed_variance=scale * (1 + scale) * squares[2],
        fixed_error=background_error,
    )
    matched, unmatched = found.yields
    total = matched + unmatched
    gradient = np.array([-unmatched, matched]) / total**2
    error = math.sqrt(max(float(gradient @ found.covariance @ gradient), 0.0))
    place = float(
        np.quantile(
            value[fit & (kind == 0)],
            0.9,
            weights=np.maximum(weight[fit & (kind == 0)], 0.0),
            method="inverted_cdf",
        )
    )
    w, far = seen_weight[seen], seen_value[seen] >= place
    return TailFraction(
        unmatched=Measured(float(unmatched / total), error),
        true=_true_share(seen_weight[seen], seen_kind[seen]),
        beyond=_share(w, far),
        place=place,
        binning=Binning.of(edges),
        data=counts,
        expected=found.expected,
        parts={
            "matched": matched * sums[0] / sums[0].sum(),
            "unmatched": unmatched * sums[1] / sums[1].sum(),
            "other": scale * sums[2],
        },
        chi2=found.chi2,
        degrees=found.degrees,
    )


def _kinds(
    table: EventTable, plan: StudyPlan, observable: str
) -> tuple[FloatArray, BoolArray, NDArray[np.int64]]:
    """Values, rows kept, and 0 matched, 1 unmatched, 2 other."""
    value = table[observable].astype(np.float64)
    keep = TableMasks(table).passing(plan, without=observable) & ~np.isnan(value)
    matched = np.isin(table["pairing_class"], _MATCHED)
    kind = np.where(table["is_signal"], np.where(matched, 0, 1), 2)
    return value, keep, kind.astype(np.int64)


def _edges(values: FloatArray, weight: FloatArray) -> FloatArray:
    """Bins of equal counts between the extremes; fewer if few weights dominate."""
    effective = weight.sum() ** 2 / (weight**2).sum()
    n = int(np.clip(effective / LEAST_PER_BIN, 4, TAIL_BINS))
    edges = np.unique(np.quantile(values, np.linspace(0, 1, n + 1)))
    edges[-1] = np.nextafter(edges[-1], np.inf)
    return edges


def _true_share(weight: FloatArray, kind: NDArray[np.int64]) -> Measured:
    """Return the unmatched share from truth; missing if no event has any."""
    signal = kind < 2
    return _share(weight[signal], kind[signal] == 1)


def _share(weight: FloatArray, those: BoolArray) -> Measured:
    """Weighted share with its error."""
    total = weight.sum()
    if not total > 0:
        return Measured(math.nan, math.nan)
    value = float(weight[those].sum() / total)
    variance = float((weight**2 * (those - value) ** 2).sum() / total**2)
    return Measured(value, math.sqrt(variance))


def _group(sample: Sample) -> str:
    """Name what is one thing to data: both helicities of a process and kind."""
    if not sample.is_signal_process:
        return sample.process
    return sample.name.removesuffix(f"_{sample.helicity.name}")
