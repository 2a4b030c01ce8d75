"""The pairing chi-square of all hypotheses, in blocks that stay in the cache.

Legs are evaluated once per block of events and shared by the hypotheses. b scores
enter as a penalty per jet and role; an infinite penalty masks. Measured: blocks of
some thousand events are several times as fast as whole arrays and need a few MB.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Iterator, Mapping
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from toprecon.kinematics import minkowski
from toprecon.pairing import legs
from toprecon.pairing.compiled import compiled_lowest, compiled_table, is_wanted
from toprecon.pairing.hypotheses import Hypotheses
from toprecon.pairing.names import TermName
from toprecon.pairing.terms import Term

FloatArray = NDArray[np.float64]
Terms = Mapping[TermName, Term]
Further = Callable[[FloatArray, NDArray[np.int64], slice], FloatArray]

BLOCK = 4096  # events; larger blocks leave the cache, smaller ones cost calls


@dataclasses.dataclass(frozen=True)
class Group:
    """Events with the same number of jets, ready for the engine.

    Parameters
    ----------
    jets : array, shape (4, n, E)
        Jet momenta [GeV].
    lepton, neutrino : array, shape (4, E)
        Their momenta [GeV]; not used in the all-hadronic channel.
    b_penalty, w_penalty : array, shape (n, E)
        Added to the chi-square for a jet used as b, or in a hadronic W.
    leptonic_b_penalty : array, shape (n, E)
        The same for the b on the leptonic side; ``b_penalty`` if absent.
    """

    jets: FloatArray
    lepton: FloatArray
    neutrino: FloatArray
    b_penalty: FloatArray | None = None
    w_penalty: FloatArray | None = None
    leptonic_b_penalty: FloatArray | None = None

    def __len__(self) -> int:
        return self.jets.shape[2]


class Joint(Protocol):
    """Density of several quantities of a hypothesis together."""

    def table(
        self,
        group: Group,
        table: Hypotheses,
        events: slice,
        allowed: NDArray[np.bool_],
    ) -> FloatArray:
        """Return the contribution of allowed hypotheses, shape (P, events)."""
        ...


@dataclasses.dataclass(frozen=True)
class Scores:
    """Outcome for every event.

    Parameters
    ----------
    best : array of int, shape (E,)
        Row of the best hypothesis; -1 if every one is masked.
    chi2, second : array, shape (E,)
        Chi-square of the best and of the next one (infinite if there is no other).
    share : array, shape (E,)
        exp(-chi2/2) of the best over the sum for all hypotheses.
    n_allowed : array of int, shape (E,)
        Hypotheses that are not masked.
    extra : array, shape (E,)
        What ``further`` made of the chi-squares; NaN without.
    """

    best: NDArray[np.int64]
    chi2: FloatArray
    second: FloatArray
    share: FloatArray
    n_allowed: NDArray[np.int64]
    extra: FloatArray


def evaluate(
    group: Group,
    table: Hypotheses,
    terms: Terms,
    *,
    joint: Joint | None = None,
    with_share: bool = True,
    further: Further | None = None,
) -> Scores:
    """Evaluate all hypotheses of all events and keep the best.

    Parameters
    ----------
    group : Group
        E events with n jets.
    table : Hypotheses
        Those of n jets.
    terms : dict
        Terms that are on.
    joint : Joint, optional
        Density of several quantities together, added to the terms.
    with_share : bool
        Whether the share and the number of hypotheses are wanted; without, they are
        NaN and 0.
    further : callable, optional
        One more number per event, of the chi-squares (P, events), the best hypothesis
        and the slice of events.

    Returns
    -------
    Scores
        Of equal hypotheses the first counts as best.
    """
    n = len(group)
    best = np.empty(n, dtype=np.int64)
    chi2, second = np.empty(n), np.empty(n)
    share, n_allowed = np.full(n, np.nan), np.zeros(n, dtype=np.int64)
    extra = np.full(n, np.nan)
    sums, least = chi2_table, two_lowest
    if is_wanted():
        sums, least = compiled_table, compiled_lowest
    for events in blocks(n):
        values = sums(group, table, terms, events)
        if joint is not None:
            values += joint.table(group, table, events, np.isfinite(values))
        best[events], chi2[events], second[events] = least(values)
        if with_share:
            with np.errstate(invalid="ignore"):  # inf - inf where all are masked
                weights = np.exp(-0.5 * (values - chi2[events]))
            share[events] = 1.0 / weights.sum(axis=0)
            n_allowed[events] = np.isfinite(values).sum(axis=0)
        if further is not None:
            extra[events] = further(values, best[events], events)
    none = ~np.isfinite(chi2)
    best[none], chi2[none], share[none] = -1, np.nan, np.nan
    return Scores(best, chi2, second, share, n_allowed, extra)


def blocks(n: int) -> Iterator[slice]:
    """Yield slices of at most :data:`BLOCK` events."""
    for start in range(0, n, BLOCK):
        yield slice(start, min(start + BLOCK, n))


def two_lowest(
    values: FloatArray,
) -> tuple[NDArray[np.int64], FloatArray, FloatArray]:
    """Return position and value of the least, and the next value, along axis 0."""
    n = values.shape[1]
    best, lowest, second = np.zeros(n, np.int64), np.full(n, np.inf), np.full(n, np.inf)
    for row, value in enumerate(values):
        better = value < lowest
        np.minimum(second, np.maximum(value, lowest), out=second)
        np.copyto(best, row, where=better)
        np.minimum(lowest, value, out=lowest)
    return best, lowest, second


def chi2_table(
    group: Group, table: Hypotheses, terms: Terms, events: slice
) -> FloatArray:
    """Return the chi-square of every hypothesis, shape (P, events)."""
    first = np.stack(list(hadronic_chi2(group, table, terms, events)))
    if not table.is_leptonic:
        return first[table.rows[:, 0]] + first[table.rows[:, 1]]
    second = np.stack(list(leptonic_chi2(group, table, terms, events)))
    return first[table.rows[:, 0]] + second[table.rows[:, 1]]


def hadronic_chi2(
    group: Group, table: Hypotheses, terms: Terms, events: slice
) -> Iterator[FloatArray]:
    """Yield the chi-square of every hadronic leg, in the order of the table."""
    wanted: dict[tuple[int, int], FloatArray] = {}
    for b, (i, j), leg in hadronic_legs(group, table, events):
        if (i, j) not in wanted:
            chi2 = np.zeros(len(leg.product))
            if legs.HADRONIC.w_mass in terms:
                chi2 += terms[legs.HADRONIC.w_mass].chi2(np.sqrt(leg.w.mass2), events)
            if group.w_penalty is not None:
                chi2 += group.w_penalty[i, events]
                chi2 += group.w_penalty[j, events]
            wanted[i, j] = chi2
        yield _sum_of_terms(leg, terms, group.b_penalty, b, events, wanted[i, j])


def hadronic_legs(
    group: Group, table: Hypotheses, events: slice
) -> Iterator[tuple[int, tuple[int, int], legs.Leg]]:
    """Yield b, W jets and quantities of every hadronic leg, in the table's order."""
    jets = [system_of(p[:, events]) for p in group.jets.swapaxes(0, 1)]
    products, pairs = {}, []
    for i, j in table.w_pairs.tolist():
        product = minkowski(group.jets[:, i, events], group.jets[:, j, events])
        products[i, j] = products[j, i] = product
        w = legs.system(
            jets[i].energy + jets[j].energy, jets[i].mass2 + jets[j].mass2 + 2 * product
        )
        pairs.append((i, j, w))
    for b, row in table.hadronic_legs.tolist():
        i, j, w = pairs[row]
        product = products[b, i] + products[b, j]
        yield b, (i, j), legs.Leg(jets[b], w, product, legs.HADRONIC)


def leptonic_chi2(
    group: Group, table: Hypotheses, terms: Terms, events: slice
) -> Iterator[FloatArray]:
    """Yield the chi-square of every leptonic leg, in the order of the table."""
    chi2 = None
    for b, leg in leptonic_legs(group, table, events):
        if chi2 is None:
            chi2 = np.zeros(len(leg.product))
            if legs.LEPTONIC.w_mass in terms:
                chi2 += terms[legs.LEPTONIC.w_mass].chi2(np.sqrt(leg.w.mass2), events)
        penalty = group.leptonic_b_penalty
        if penalty is None:
            penalty = group.b_penalty
        yield _sum_of_terms(leg, terms, penalty, b, events, chi2)


def leptonic_legs(
    group: Group, table: Hypotheses, events: slice
) -> Iterator[tuple[int, legs.Leg]]:
    """Yield b and quantities of every leptonic leg, in the order of the table."""
    if not table.is_leptonic:
        return
    w_momentum = group.lepton[:, events] + group.neutrino[:, events]
    w = system_of(w_momentum)
    for b in table.leptonic_legs.tolist():
        jet = group.jets[:, b, events]
        product = minkowski(jet, w_momentum)
        yield b, legs.Leg(system_of(jet), w, product, legs.LEPTONIC)


def _sum_of_terms(
    leg: legs.Leg,
    terms: Terms,
    penalty: FloatArray | None,
    b: int,
    events: slice,
    chi2: FloatArray,
) -> FloatArray:
    """Chi-square of a leg on top of that of its W."""
    for name, value in leg.values(terms):
        chi2 = chi2 + terms[name].chi2(value, events)
    return chi2 if penalty is None else chi2 + penalty[b, events]


def system_of(p: FloatArray) -> legs.System:
    """Return the system of a momentum of shape (4, E)."""
    return legs.system(p[0], minkowski(p, p))
