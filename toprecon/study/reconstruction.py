"""The expensive stage: events in, event table out.

The order of the steps is written here and nowhere else:
selection -> pairing -> truth -> one row per event.
"""

from __future__ import annotations

from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon import __version__, kinematics
from toprecon.events import (
    Branch,
    EventTable,
    Status,
    components,
    has_truth,
    samples_of,
    validate_events,
)
from toprecon.pairing import build, pair
from toprecon.selection import select
from toprecon.study.plan import Direction, Frame, StudyPlan
from toprecon.truth import (
    classify,
    closest_assignment,
    hadronic_sides,
    signal_region,
    sqrt_s_prime,
    true_sign,
)

FloatArray = NDArray[np.float64]


def reconstruct(events: ak.Array, plan: StudyPlan) -> EventTable:
    """Reconstruct the pairs of events and compare them with the generated ones.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events of one or several samples.
    plan : StudyPlan
        Its sections up to ``[angle]`` are used.

    Returns
    -------
    EventTable
        One row per event, selected or not, in the order of the events.
    """
    validate_events(events)
    channel = plan.study.channel
    selection = select(events, plan.selection, channel=channel)
    tops = pair(events, plan.pairing, channel=channel)
    samples = samples_of(events)
    process = np.array([s.is_signal_process for s in samples], dtype=bool)
    sample = ak.to_numpy(events.sample)
    is_signal_process = process[sample]
    truth_known = has_truth(events)
    is_signal = (
        is_signal_process
        & truth_known
        & signal_region(events, plan.truth, channel=channel)
    )
    matching = closest_assignment(events, channel=channel)
    matched = truth_known & (matching.angle < plan.truth.match_angle)
    pairing_class = classify(
        ak.to_numpy(tops.assignment),
        matching.assignment,
        has_truth=truth_known,
        is_signal_process=is_signal_process,
        matched=matched,
        channel=channel,
    )
    status = ak.to_numpy(tops.status).astype(np.uint8)
    reco = measured_cosine(tops, plan)
    truth_says = true_sign(
        events, tops, channel=channel, matching=matching, options=plan.truth
    )
    chosen = reco * truth_says
    closest = measured_cosine(
        build(events, matching.assignment, plan.pairing, channel=channel), plan
    )
    columns: dict[str, Any] = {
        "id": ak.to_numpy(events.id),
        "sample": sample,
        "weight": ak.to_numpy(events.weight),
        "is_signal": is_signal,
        "stage": selection.stage,
        "status": status,
        "branch": np.where(status == Status.OK, Branch.RESOLVED, Branch.NONE),
        "pairing_class": pairing_class,
        **true_cosines(events, plan),
        "cos_theta_closest": np.where(matched, closest, np.nan),
        "cos_theta_chosen": np.where(truth_known & is_signal_process, chosen, np.nan),
        "cos_theta_reco": reco,
    }
    columns.update(_observables(selection.observables, len(events)))
    columns.update(_observables(tops.observables, len(events)))
    return EventTable(
        columns,
        samples,
        selection.steps,
        {
            "plan": plan.reconstruct_settings,
            "plan_hash": plan.reconstruct_hash,
            "version": __version__,
        },
    )


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


def true_cosines(events: ak.Array, plan: StudyPlan) -> dict[str, FloatArray]:
    """Return the generated angles.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events, with or without truth.
    plan : StudyPlan
        Its frame decides which one is ``cos_theta_true``.

    Returns
    -------
    dict of array, shape (E,)
        ``cos_theta_true`` (top, frame of the plan), ``cos_theta_true_lab``,
        ``cos_theta_true_pair`` (rest frame of the pair, which is the frame of the
        tree-level formula), ``cos_theta_true_hadronic`` (signed direction of the
        hadronic side, laboratory) and ``sqrt_s_prime`` [GeV]; NaN without truth.
    """
    nothing = np.full(len(events), np.nan)
    if "truth" not in events.fields:
        names = ("", "_lab", "_pair", "_hadronic")
        missing = {f"cos_theta_true{name}": nothing for name in names}
        return {**missing, "sqrt_s_prime": nothing}
    top, antitop = components(events.truth.top), components(events.truth.antitop)
    lab = kinematics.cos_theta(top)
    pair_momentum = top + antitop
    with np.errstate(invalid="ignore"):
        in_pair = kinematics.cos_theta(kinematics.to_rest_frame(top, pair_momentum))
    both = kinematics.cos_theta(top - antitop)
    hadronic_top, hadronic_antitop = hadronic_sides(events)
    hadronic = np.select(
        [hadronic_top & ~hadronic_antitop, hadronic_antitop & ~hadronic_top],
        [lab, -kinematics.cos_theta(antitop)],
        both,
    )
    return {
        "cos_theta_true": in_pair if plan.angle.frame is Frame.PAIR else lab,
        "cos_theta_true_lab": lab,
        "cos_theta_true_pair": in_pair,
        "cos_theta_true_hadronic": hadronic,
        "sqrt_s_prime": sqrt_s_prime(events),
    }


def _observables(record: ak.Array, n: int) -> dict[str, NDArray[np.float32]]:
    """Columns of observables; a value beyond float32 becomes infinite, as it should."""
    with np.errstate(over="ignore"):
        return {
            name: ak.to_numpy(record[name]).astype(np.float32).reshape(n)
            for name in record.fields
        }
