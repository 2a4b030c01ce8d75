"""The expensive stage: events in, event table out.

The order of the steps is written here and nowhere else:
selection -> pair of tops in the branch of the plan -> truth -> one row per event.
"""

from __future__ import annotations

from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon import __version__, kinematics
from toprecon.events import (
    EventTable,
    components,
    has_truth,
    samples_of,
    validate_events,
)
from toprecon.selection import select
from toprecon.study.branches import is_signal_process, reconstruct_branch
from toprecon.study.plan import Frame, StudyPlan
from toprecon.truth import hadronic_sides, signal_region, sqrt_s_prime

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
    branch = reconstruct_branch(events, plan)
    inside = signal_region(events, plan.truth, channel=channel)
    columns: dict[str, Any] = {
        "id": ak.to_numpy(events.id),
        "sample": ak.to_numpy(events.sample),
        "weight": ak.to_numpy(events.weight),
        "is_signal": is_signal_process(events) & has_truth(events) & inside,
        "stage": selection.stage,
        **branch.columns,
        **true_cosines(events, plan),
    }
    for name in selection.observables.fields:
        values = ak.to_numpy(selection.observables[name])
        columns[name] = values.astype(np.float32)
    columns.update(branch.observables)
    return EventTable(
        columns,
        samples_of(events),
        selection.steps,
        {
            "plan": plan.reconstruct_settings,
            "plan_hash": plan.reconstruct_hash,
            "version": __version__,
        },
    )


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
