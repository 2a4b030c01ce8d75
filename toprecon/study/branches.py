"""The two ways to reconstruct a pair, and the choice between them per event.

Every branch gives the same columns of the event table; what differs is how the pair
is found and what a mistake is called.
"""

from __future__ import annotations

import dataclasses
from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon import kinematics
from toprecon.boosted import containment_class, find_tops
from toprecon.events import (
    Branch,
    Channel,
    PairingClass,
    Status,
    components,
    has_truth,
    momenta,
    samples_of,
)
from toprecon.pairing import build, fit, pair
from toprecon.study.plan import BranchChoice, Direction, Frame, StudyPlan
from toprecon.truth import Matching, classify, closest_assignment, true_sign

FloatArray = NDArray[np.float64]


@dataclasses.dataclass(frozen=True)
class BranchColumns:
    """What a branch contributes to the event table.

    Parameters
    ----------
    columns : dict of array, shape (E,)
        ``status``, ``branch``, ``pairing_class`` and the angles.
    observables : dict of array, shape (E,)
        Observables by name.
    """

    columns: dict[str, NDArray[Any]]
    observables: dict[str, NDArray[np.float32]]


def reconstruct_branch(events: ak.Array, plan: StudyPlan) -> BranchColumns:
    """Reconstruct pairs in the branch of the plan.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events.
    plan : StudyPlan
        Its ``study.branch`` decides.

    Returns
    -------
    BranchColumns
        Per event: the boosted pair where its tag is passed by the fat jet of every
        hadronic top, the resolved one elsewhere.
    """
    channel = plan.study.channel
    matching = closest_assignment(events, channel=channel)
    if plan.study.branch is BranchChoice.RESOLVED:
        return _resolved(events, plan, matching)
    if plan.study.branch is BranchChoice.BOOSTED:
        return _boosted(events, plan, matching)
    resolved = _resolved(events, plan, matching)
    boosted = _boosted(events, plan, matching)
    needed = 2 if channel is Channel.ALL_HADRONIC else 1
    use = boosted.observables["boosted.n_tagged"] >= needed
    use &= boosted.columns["status"] == Status.OK
    columns = {
        name: np.where(use, boosted.columns[name], column)
        for name, column in resolved.columns.items()
    }
    return BranchColumns(columns, {**resolved.observables, **boosted.observables})


def measured_cosine(tops: ak.Array, plan: StudyPlan) -> FloatArray:
    """Return cos(theta) of the top from reconstructed pairs.

    Parameters
    ----------
    tops : ak.Array, shape (E,)
        Reconstructed pairs; top and antitop as the measured charges say.
    plan : StudyPlan
        Its section ``[angle]`` gives direction and frame.

    Returns
    -------
    array, shape (E,)
        In [-1, 1]; NaN where there is no pair. The antitop's direction counts with
        the opposite sign. With ``difference``, and where both sides are hadronic, the
        direction is that of p(top) - p(antitop), so that both count.
    """
    top, antitop = components(tops.top), components(tops.antitop)
    if plan.angle.frame is Frame.PAIR:
        pair_momentum = top + antitop
        top = kinematics.to_rest_frame(top, pair_momentum)
        antitop = kinematics.to_rest_frame(antitop, pair_momentum)
    both = kinematics.cos_theta(top - antitop)
    if plan.angle.direction is Direction.DIFFERENCE:
        return both
    side = ak.to_numpy(tops.hadronic_side).astype(np.int8)
    if plan.angle.direction is Direction.LEPTONIC:
        side = -side
    from_top, from_antitop = kinematics.cos_theta(top), -kinematics.cos_theta(antitop)
    return np.select([side > 0, side < 0], [from_top, from_antitop], both)


def is_signal_process(events: ak.Array) -> NDArray[np.bool_]:
    """Return which events belong to a top-pair sample, shape (E,)."""
    flags = np.array([s.is_signal_process for s in samples_of(events)], dtype=bool)
    return flags[ak.to_numpy(events.sample)]


def _resolved(events: ak.Array, plan: StudyPlan, matching: Matching) -> BranchColumns:
    """Pair jets, refine by the constrained fit if it is on, compare with the truth."""
    channel = plan.study.channel
    tops = pair(events, plan.pairing, channel=channel)
    observables = _observables(tops)
    if plan.fit.on:
        tops, fitted = _fitted(events, tops, plan)
        observables.update(fitted)
    known = has_truth(events)
    matched = known & (matching.angle < plan.truth.match_angle)
    pairing_class = classify(
        ak.to_numpy(tops.assignment),
        matching.assignment,
        has_truth=known,
        is_signal_process=is_signal_process(events),
        matched=matched,
        channel=channel,
    )
    truth_tops = build(events, matching.assignment, plan.pairing, channel=channel)
    if plan.fit.on:
        truth_tops, _ = _fitted(events, truth_tops, plan)
    closest = np.where(matched, measured_cosine(truth_tops, plan), np.nan)
    return _columns(
        events,
        tops,
        plan,
        matching,
        Branch.RESOLVED,
        pairing_class,
        closest,
        observables,
    )


def _boosted(events: ak.Array, plan: StudyPlan, matching: Matching) -> BranchColumns:
    """Find fat jets and compare with the truth."""
    channel = plan.study.channel
    tops = find_tops(events, plan.boosted, channel=channel)
    pairing_class = containment_class(
        events,
        tops,
        plan.boosted,
        is_signal_process=is_signal_process(events),
        channel=channel,
    )
    made = _columns(
        events, tops, plan, matching, Branch.BOOSTED, pairing_class, None,
        _observables(tops),
    )  # fmt: skip
    # there is no assignment of jets: a contained event has the right one by definition
    made.columns["cos_theta_closest"] = np.where(
        pairing_class == PairingClass.CORRECT,
        made.columns["cos_theta_chosen"],
        np.nan,
    )
    return made


def _columns(
    events: ak.Array,
    tops: ak.Array,
    plan: StudyPlan,
    matching: Matching,
    branch: Branch,
    pairing_class: NDArray[np.uint8],
    closest: FloatArray | None,
    observables: dict[str, NDArray[np.float32]],
) -> BranchColumns:
    """Columns that every branch has."""
    status = ak.to_numpy(tops.status).astype(np.uint8)
    reco = measured_cosine(tops, plan)
    sign = true_sign(
        events,
        tops,
        channel=plan.study.channel,
        matching=matching,
        options=plan.truth,
    )
    usable = has_truth(events) & is_signal_process(events)
    nothing = np.full(len(events), np.nan)
    columns: dict[str, NDArray[Any]] = {
        "status": status,
        "branch": np.where(status == Status.OK, branch, Branch.NONE).astype(np.uint8),
        "pairing_class": pairing_class,
        "cos_theta_closest": nothing if closest is None else closest,
        "cos_theta_chosen": np.where(usable, reco * sign, np.nan),
        "cos_theta_reco": reco,
    }
    return BranchColumns(columns, observables)


def _fitted(
    events: ak.Array, tops: ak.Array, plan: StudyPlan
) -> tuple[ak.Array, dict[str, NDArray[np.float32]]]:
    """Momenta after the fit; the ones before it where the fit has failed."""
    result = fit(
        events, ak.to_numpy(tops.assignment), plan.fit, channel=plan.study.channel
    )
    for name in ("top", "antitop", "w_plus", "w_minus", "neutrino"):
        before, after = components(tops[name]), getattr(result, name)
        tops = ak.with_field(
            tops, momenta(np.where(result.success, after, before)), name
        )
    values = result.observables()
    return tops, {name: _float32(column) for name, column in values.items()}


def _observables(tops: ak.Array) -> dict[str, NDArray[np.float32]]:
    """Observables of Tops as columns."""
    record = tops.observables
    return {name: _float32(ak.to_numpy(record[name])) for name in record.fields}


def _float32(values: Any) -> NDArray[np.float32]:
    """Numbers as stored; one beyond float32 becomes infinite, as it should."""
    with np.errstate(over="ignore"):
        return np.asarray(values).astype(np.float32)
