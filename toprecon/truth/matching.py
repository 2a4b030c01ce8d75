"""Which jet belongs to which quark: the assignment of least total angle.

All events with the same number of jets are done at once, by adding one quark after
the other to the cheapest way of serving the quarks before it (the dynamic programme
over subsets of jets); it visits n 2^(n-1) sums instead of n!/(n-k)! permutations.
"""

from __future__ import annotations

import dataclasses
from itertools import combinations

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.events import Channel, components, has_truth
from toprecon.kinematics import angle

FloatArray = NDArray[np.float64]

QUARKS = ("b", "w_plus_up", "w_plus_down", "bbar", "w_minus_up", "w_minus_down")
"""Order of the columns of an assignment."""

MOST_JETS = 12
"""Jets considered in the matching; the subsets of more would not fit in memory."""


@dataclasses.dataclass(frozen=True)
class Matching:
    """The assignment that the generated quarks ask for.

    Parameters
    ----------
    assignment : array of int8, shape (E, 6)
        Jet of b, q, q of the top, then of the antitop; -1 where there is no quark
        (leptonic side) or no answer.
    angles : array, shape (E, 6)
        Angle between quark and jet [rad]; NaN where there is no jet.
    angle : array, shape (E,)
        Largest of them; NaN where the channel's quarks or jets do not exist.
    """

    assignment: NDArray[np.int8]
    angles: FloatArray
    angle: FloatArray


def closest_assignment(
    events: ak.Array, *, channel: Channel = Channel.LEPTON_JETS
) -> Matching:
    """Assign every quark of the channel its own jet, with the least total angle.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events; those without truth, with other decays than the channel's or with
        fewer jets than quarks get no assignment.
    channel : Channel
        Lepton+jets has four quarks (both b and those of the hadronic W), all-hadronic
        six.

    Returns
    -------
    Matching
        Assignment and angles.
    """
    n = len(events)
    assignment = np.full((n, 6), -1, dtype=np.int8)
    angles = np.full((n, 6), np.nan)
    if "truth" in events.fields and n:
        counts = ak.to_numpy(ak.num(events.jets, axis=1)).astype(np.int64)
        for columns, wanted in _decays(events, channel):
            for n_jets in np.unique(counts[wanted & (counts >= len(columns))]):
                rows = np.flatnonzero(wanted & (counts == n_jets))
                jets, between = _closest(events[rows], int(n_jets), columns)
                assignment[rows[:, None], columns] = jets
                angles[rows[:, None], columns] = between
    found = (assignment >= 0).any(axis=1)
    largest = np.full(n, np.nan)
    largest[found] = np.nanmax(angles[found], axis=1)
    return Matching(assignment, angles, largest)


def hadronic_sides(events: ak.Array) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """Return whether the generated top and antitop decay to quarks, shape (E,) each."""
    known = has_truth(events)
    sides = []
    for name in ("w_plus_up", "w_minus_up"):
        pdg = absolute_pdg(events, name)
        sides.append(known & (pdg >= 1) & (pdg <= 6))
    return sides[0], sides[1]


def absolute_pdg(events: ak.Array, name: str) -> NDArray[np.int64]:
    """Return the particle number of a generated fermion without its sign, 0 if none."""
    number = np.nan_to_num(ak.to_numpy(events.truth[name].pdg).astype(np.float64))
    return np.abs(number).astype(np.int64)


def _decays(
    events: ak.Array, channel: Channel
) -> list[tuple[NDArray[np.int64], NDArray[np.bool_]]]:
    """Columns filled, and the events that have just these quarks."""
    top, antitop = hadronic_sides(events)
    if channel is Channel.ALL_HADRONIC:
        return [(np.arange(6), top & antitop)]
    known = has_truth(events)
    return [
        (np.array([0, 1, 2, 3]), known & top & ~antitop),
        (np.array([0, 3, 4, 5]), known & antitop & ~top),
    ]


def _closest(
    events: ak.Array, n_jets: int, columns: NDArray[np.int64]
) -> tuple[NDArray[np.int8], FloatArray]:
    """Jets and angles of some quarks for events of equally many jets."""
    flat = components(ak.flatten(events.jets, axis=1))
    jets = flat.reshape(4, len(events), n_jets)
    kept = np.broadcast_to(np.arange(n_jets), (len(events), n_jets))
    if n_jets > MOST_JETS:
        # soft jets are the last to be a quark's: the most energetic are considered
        kept = np.sort(np.argsort(-jets[0], axis=1)[:, :MOST_JETS], axis=1)
        jets = np.take_along_axis(jets, kept[None], axis=2)
    cost = np.stack(
        [
            angle(components(events.truth[QUARKS[column]])[:, :, None], jets)
            for column in columns
        ]
    )
    # a quark or jet at rest has no direction and is as far as can be
    chosen = _least_total(np.nan_to_num(cost, nan=np.pi))
    between = np.take_along_axis(cost, chosen.T[:, :, None], axis=2)[:, :, 0].T
    jet_index = np.take_along_axis(kept, chosen, axis=1)
    return jet_index.astype(np.int8), np.nan_to_num(between, nan=np.pi)


def _least_total(cost: FloatArray) -> NDArray[np.int64]:
    """Column of every row with the least sum, for costs of shape (Q, E, J): (E, Q)."""
    n_rows, n_events, n_columns = cost.shape
    best: dict[int, FloatArray] = {0: np.zeros(n_events)}
    last_column: dict[int, NDArray[np.int64]] = {}
    for row in range(n_rows):
        totals: dict[int, FloatArray] = {}
        for columns in combinations(range(n_columns), row + 1):
            subset = sum(1 << column for column in columns)
            sums = np.stack(
                [best[subset - (1 << c)] + cost[row, :, c] for c in columns]
            )
            choice = np.argmin(sums, axis=0)
            totals[subset] = np.take_along_axis(sums, choice[None], axis=0)[0]
            last_column[subset] = np.asarray(columns)[choice]
        best = totals
    final = np.argmin(np.stack(list(best.values())), axis=0)
    subset_of_event = np.asarray(list(best))[final]
    chosen = np.empty((n_events, n_rows), dtype=np.int64)
    for row in reversed(range(n_rows)):
        for subset in np.unique(subset_of_event):
            here = subset_of_event == subset
            chosen[here, row] = last_column[int(subset)][here]
        subset_of_event = subset_of_event - (np.int64(1) << chosen[:, row])
    return chosen
