"""The unmatched share of the signal, from the tail of the pairing score.

Matched events pair up well, unmatched ones fill the tail. Truth makes the templates and
the check; what is fitted needs none.
"""

from __future__ import annotations

import dataclasses
import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import OptionError, StudyError
from toprecon.events import Binning, EventTable, PairingClass
from toprecon.statistics import (
    Measured,
    TemplateFit,
    fit_templates,
    plain_number,
    weighted_share,
)
from toprecon.study.distributions import TableMasks
from toprecon.study.plan import CutOptions, StudyPlan
from toprecon.study.sums import check_plan
from toprecon.study.weights import SampleFactors, weighted_rows

FloatArray = NDArray[np.float64]
BoolArray = NDArray[np.bool_]

BINS = 20
LEAST_PER_BIN = 25
"""Effective events per bin of the fit."""

_MATCHED = (PairingClass.CORRECT, PairingClass.B_SWAPPED, PairingClass.W_MIXED)


@dataclasses.dataclass(frozen=True)
class TailFraction:
    """The unmatched share of the signal, from the shape of the pairing score.

    Parameters
    ----------
    unmatched : Measured
        Share of unmatched events in the selected signal, from the fit; the error holds
        the statistics of what is fitted and of the templates.
    counted : Measured
        The same from the share of events beyond ``place`` alone: two bins.
    true : Measured
        The same from truth, of the events fitted; NaN without truth.
    expected_error : float
        Error of the fit in data of the plan's luminosity with templates known exactly;
        NaN without a luminosity.
    beyond : Measured
        Share of all events fitted with a score of at least ``place``.
    place : float
        Where the tail begins.
    binning : Binning
        Bins of the fit; the last one is open.
    data, errors, expected : array, shape (B,)
        What was fitted, the errors of the bins in the fit, and the fit.
    parts : dict of array, shape (B,)
        ``matched``, ``unmatched`` and ``other`` as fitted.
    chi2 : float
        Of the fit.
    degrees : int
        Its degrees of freedom.
    is_expected : bool
        Whether the bins hold expected events, rather than sums of generator weights.
    cut : CutOptions or None
        The cut on the score, which is not applied here.
    """

    unmatched: Measured
    counted: Measured
    true: Measured
    expected_error: float
    beyond: Measured
    place: float
    binning: Binning
    data: FloatArray
    errors: FloatArray
    expected: FloatArray
    parts: dict[str, FloatArray]
    chi2: float
    degrees: int
    is_expected: bool
    cut: CutOptions | None

    @property
    def pull(self) -> float:
        """Fitted minus true share over the error of the difference; NaN without truth.

        Both fluctuate with the same events. The true share is the best estimate that
        they allow, so the variances subtract (J. A. Hausman, Econometrica 46 (1978)
        1251).
        """
        variance = self.unmatched.error**2 - self.true.error**2
        if not variance > 0:  # no truth, or a fit better than truth by chance
            return math.nan
        return (self.unmatched.value - self.true.value) / math.sqrt(variance)

    def to_mapping(self) -> dict[str, Any]:
        """Return plain data; a missing number is ``None``."""
        return {
            "unmatched": self.unmatched.to_mapping(),
            "counted": self.counted.to_mapping(),
            "true": self.true.to_mapping(),
            "pull": plain_number(self.pull),
            "expected_error": plain_number(self.expected_error),
            "beyond": self.beyond.to_mapping(),
            "place": self.place,
            "edges": list(self.binning.edges),
            "data": self.data.tolist(),
            "errors": self.errors.tolist(),
            "fit": self.expected.tolist(),
            "parts": {name: part.tolist() for name, part in self.parts.items()},
            "chi2": self.chi2,
            "degrees": self.degrees,
            "expected": self.is_expected,
        }

    def __str__(self) -> str:
        check = "no truth to check it with"
        if not math.isnan(self.true.value):
            check = f"from truth {self.true}"
            if not math.isnan(self.pull):
                check = f"{check} (pull {self.pull:+.1f})"
        data = (
            "the plan states no luminosity for an error in data"
            if math.isnan(self.expected_error)
            else f"in data +- {self.expected_error:.4f}"
        )
        cut = f", before the cut on {self.cut.observable}" if self.cut else ""
        return (
            f"unmatched share of the signal{cut}, from the shape of the pairing score: "
            f"{self.unmatched}, {check}; {data}; fit: chi2 {self.chi2:.1f} for "
            f"{self.degrees} degrees of freedom; {self.beyond} of all events have a "
            f"score of at least {self.place:.3g}, which alone gives {self.counted}"
        )


def unmatched_from_tail(
    table: EventTable,
    plan: StudyPlan,
    *,
    data: EventTable | None = None,
    observable: str = "pairing.chi2",
    place: float | None = None,
    beams: str = "plan",
    background_error: float = 0.0,
) -> TailFraction:
    """Fit the unmatched share of the signal to the distribution of the pairing score.

    Templates of matched events, right or wrong, and of unmatched ones come from half A
    of the simulated signal. What else is selected (signal process outside the truth
    phase space, other processes) is taken from there too, and held fixed.

    Parameters
    ----------
    table : EventTable
        Simulated events with truth.
    plan : StudyPlan
        Cuts (but that on the observable), beams, luminosity.
    data : EventTable, optional
        Events to be fitted, without need of truth, of the plan's luminosity; half B of
        the table if absent.
    observable : str
        A column of the table.
    place : float, optional
        Where the tail begins; a score that a tenth of the matched events exceed if
        absent.
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
        If half A has no matched or no unmatched events, or nothing is to be fitted.
    OptionError
        If the signal of half A lies on one side of ``place``.

    Notes
    -----
    See :func:`toprecon.statistics.fit_templates` for the statistics of the templates.
    Without expected numbers the share of all else in ``data`` is that of half A.
    """
    simulated, factors = _selected(table, plan, observable, beams)
    half_a = table.in_half_a
    model = simulated.of(half_a)
    for name, code in (("matched", 0), ("unmatched", 1)):
        if not (model.kind == code).any():
            msg = (
                f"tail: {name} signal events with truth are required in half A for a "
                "template; got none; give simulated top pairs with truth"
            )
            raise StudyError(msg)
    if data is None:
        seen = simulated.of(~half_a)
    else:
        seen = _selected(data, plan, observable, beams)[0].of(np.ones(len(data), bool))
    if not seen.weight.sum() > 0:
        msg = (
            f"tail: selected events with a defined {observable} are required to be "
            f"fitted; got {len(seen.weight)}, of weight {seen.weight.sum():g} in all; "
            "loosen the cuts or give more events"
        )
        raise StudyError(msg)
    all_a, all_b = (float(simulated.weight[h].sum()) for h in (half_a, ~half_a))
    if data is None:
        scale, to_luminosity, ratio = all_b / all_a, (all_a + all_b) / all_b, None
    else:
        scale, to_luminosity = (all_a + all_b) / all_a, 1.0
        if not factors.is_expected:
            scale = float(seen.weight.sum() / model.weight.sum())
        ratio = float((seen.weight**2).sum() / seen.weight.sum())

    def fitted(edges: FloatArray) -> TemplateFit:
        sums, squares = model.templates(edges)
        # fitted with the weights of the simulation, the rest fluctuates there as well
        both = scale**2 + (scale if data is None else 0.0)
        return fit_templates(
            seen.histogram(edges), sums[:2], squares[:2], fixed=scale * sums[2],
            fixed_variance=both * squares[2], fixed_error=background_error,
            data_weight=ratio,
        )  # fmt: skip

    edges = _edges(model)
    sums, _ = model.templates(edges)
    found = fitted(edges)
    start = _place(model) if place is None else float(place)
    in_data = math.nan
    if factors.is_expected:
        in_data = _share_of(
            fit_templates(
                to_luminosity * found.expected, sums[:2], np.zeros((2, len(edges) - 1)),
                fixed=to_luminosity * scale * sums[2], fixed_error=background_error,
                data_weight=1.0,
            )
        ).error  # fmt: skip
    signal = seen.kind < 2
    return TailFraction(
        unmatched=_share_of(found),
        counted=_share_of(fitted(_two_bins(model, start, observable))),
        true=weighted_share(seen.weight[signal], seen.kind[signal] == 1),
        expected_error=in_data,
        beyond=weighted_share(seen.weight, seen.value >= start),
        place=start,
        binning=Binning.of(edges),
        data=seen.histogram(edges),
        errors=found.errors,
        expected=found.expected,
        parts={
            "matched": found.yields[0] * sums[0] / sums[0].sum(),
            "unmatched": found.yields[1] * sums[1] / sums[1].sum(),
            "other": scale * sums[2],
        },
        chi2=found.chi2,
        degrees=found.degrees,
        is_expected=factors.is_expected,
        cut=next((c for c in plan.active_cuts if c.observable == observable), None),
    )


@dataclasses.dataclass(frozen=True)
class _Rows:
    """Rows with their score, weight, kind (0 matched, 1 unmatched, 2 other), sample."""

    value: FloatArray
    weight: FloatArray
    kind: NDArray[np.int64]
    sample: NDArray[np.int16]

    def of(self, rows: BoolArray) -> _Rows:
        """Those of these rows that count: a defined score and a weight."""
        rows = rows & ~np.isnan(self.value) & (self.weight != 0)
        return _Rows(*(c[rows] for c in dataclasses.astuple(self)))

    def histogram(
        self, edges: FloatArray, *, kind: int | None = None, power: int = 1
    ) -> FloatArray:
        """Sum powers of the weights; the outer bins are open."""
        n = len(edges) - 1
        rows = slice(None) if kind is None else self.kind == kind
        place = np.searchsorted(edges, self.value[rows], side="right") - 1
        return np.bincount(
            np.clip(place, 0, n - 1), self.weight[rows] ** power, minlength=n
        ).astype(np.float64)

    def templates(self, edges: FloatArray) -> tuple[list[FloatArray], list[FloatArray]]:
        """Return sums of weights and their variances, by kind."""
        sums = [self.histogram(edges, kind=k) for k in range(3)]
        squares = [self.histogram(edges, kind=k, power=2) for k in range(2)]
        rest, n = np.zeros(len(edges) - 1), len(edges) - 1
        for number in np.unique(self.sample[self.kind == 2]):
            # few heavy events: a bin without any is not known to have none, so they are
            # shared out by the rule of succession (Laplace), (n_b + 1) of (N + bins)
            one = self.of((self.kind == 2) & (self.sample == number))
            counts = one.histogram(edges, power=0)
            total = float((one.weight**2).sum())
            rest += total * (counts + 1) / (len(one.weight) + n)
        return sums, [*squares, rest]


def _selected(
    table: EventTable, plan: StudyPlan, observable: str, beams: str
) -> tuple[_Rows, SampleFactors]:
    """All rows; those that fail have no score."""
    check_plan(table, plan)
    weight, factors = weighted_rows(table, plan.beams, beams)
    passed = TableMasks(table).passing(plan, without=observable)
    value = np.where(passed, table[observable].astype(np.float64), np.nan)
    matched = np.isin(table["pairing_class"], _MATCHED)
    kind = np.where(table["is_signal"], np.where(matched, 0, 1), 2)
    return _Rows(value, weight, kind.astype(np.int64), table["sample"]), factors


def _edges(model: _Rows) -> FloatArray:
    """Bins of equal counts between the extremes; fewer if few weights dominate."""
    effective = model.weight.sum() ** 2 / (model.weight**2).sum()
    n = int(np.clip(effective / LEAST_PER_BIN, 4, BINS))
    edges = np.unique(np.quantile(model.value, np.linspace(0, 1, n + 1)))
    edges[-1] = np.nextafter(edges[-1], np.inf)
    return edges


def _place(model: _Rows) -> float:
    """Return the score that a tenth of the matched events exceed."""
    matched = model.kind == 0
    return float(
        np.quantile(
            model.value[matched],
            0.9,
            weights=np.maximum(model.weight[matched], 0.0),
            method="inverted_cdf",
        )
    )


def _two_bins(model: _Rows, place: float, observable: str) -> FloatArray:
    """Return edges of a core and a tail."""
    signal = model.value[model.kind < 2]
    low, high = float(signal.min()), float(signal.max())
    if not low < place <= high:
        msg = (
            f"place: the tail must begin above {low:g} and not above {high:g}, the least "
            f"and the largest {observable} of the signal in half A; got {place:g}"
        )
        raise OptionError(msg)
    return np.array([low, place, np.nextafter(high, np.inf)])


def _share_of(found: TemplateFit) -> Measured:
    """Return the share of the second of two templates."""
    first, second = found.yields
    total = first + second
    gradient = np.array([-second, first]) / total**2
    variance = float(gradient @ found.covariance @ gradient)
    return Measured(float(second / total), math.sqrt(max(variance, 0.0)))
