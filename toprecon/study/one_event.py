"""One event in detail: what was chosen, and what the generated quarks say."""

from __future__ import annotations

import math

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.events import (
    TRUTH_MOMENTA,
    Channel,
    PairingClass,
    Status,
    components,
    has_truth,
)
from toprecon.figures import EventObject, EventView
from toprecon.pairing import build, fit, pair
from toprecon.study.plan import StudyPlan
from toprecon.study.reconstruction import reconstruct
from toprecon.truth import closest_assignment

SLOTS = (
    ("top", "b"),
    ("top", "W"),
    ("top", "W"),
    ("antitop", "b"),
    ("antitop", "W"),
    ("antitop", "W"),
)
"""Side and role of the six places of an assignment."""

GENERATED = {
    "b": ("top", "b"),
    "w_plus_up": ("top", "W"),
    "w_plus_down": ("top", "W"),
    "bbar": ("antitop", "b"),
    "w_minus_up": ("antitop", "W"),
    "w_minus_down": ("antitop", "W"),
}
"""Side and role of the generated quarks and leptons."""


def view_event(events: ak.Array, plan: StudyPlan) -> EventView:
    """Look at one event, its jets paired as the plan says.

    Parameters
    ----------
    events : ak.Array, shape (1,)
        Events with one row.
    plan : StudyPlan
        The plan. The boosted branch has no assignment of jets; its angles and class
        are listed, and the picture shows the pairing of the jets.

    Returns
    -------
    EventView
        Ready for :func:`toprecon.figures.event_figure`.
    """
    channel = plan.study.channel
    tops = pair(events, plan.pairing, channel=channel)
    chosen = ak.to_numpy(tops.assignment)
    known = bool(has_truth(events)[0])
    matching = closest_assignment(events, channel=channel)
    matched = known and matching.angle[0] < plan.truth.match_angle
    closest = matching.assignment if matched else np.full((1, 6), -1)
    objects = _jets(events, chosen[0], closest[0])
    if channel is Channel.LEPTON_JETS:
        objects += _leptonic(events, tops)
    return EventView(
        objects=tuple(objects),
        generated=_generated(events) if known else (),
        top=components(tops.top)[:, 0],
        facts=_facts(events, plan, chosen),
    )


def _jets(
    events: ak.Array, chosen: NDArray[np.int8], closest: NDArray[np.int8]
) -> list[EventObject]:
    """Jets with what they were taken for and what they are."""
    momenta = components(events.jets[0])
    scores = ak.to_numpy(events.jets.btag[0])
    taken = {int(jet): SLOTS[k] for k, jet in enumerate(chosen) if jet >= 0}
    truth = {int(jet): SLOTS[k] for k, jet in enumerate(closest) if jet >= 0}
    return [
        EventObject(
            f"jet {jet + 1}",
            momenta[:, jet],
            *taken.get(jet, ("", "")),
            *truth.get(jet, ("", "")),
            b_score=float(scores[jet]),
        )
        for jet in range(len(scores))
    ]


def _leptonic(events: ak.Array, tops: ak.Array) -> list[EventObject]:
    """Return lepton and neutrino, on the side that is not hadronic."""
    side = {1: "antitop", -1: "top"}.get(int(tops.hadronic_side[0]), "")
    out = []
    if len(events.leptons[0]):
        energies = ak.to_numpy(events.leptons.E[0])
        lepton = components(events.leptons[0])[:, int(np.argmax(energies))]
        out.append(EventObject("lepton", lepton, side, "lepton" if side else ""))
    neutrino = components(tops.neutrino)[:, 0]
    if np.isfinite(neutrino).all():
        out.append(EventObject("ν", neutrino, side, "neutrino" if side else ""))
    return out


def _generated(events: ak.Array) -> tuple[EventObject, ...]:
    """Return the generated quarks and leptons."""
    return tuple(
        EventObject(name, components(events.truth[name])[:, 0], *GENERATED[name])
        for name in TRUTH_MOMENTA
        if name in GENERATED
    )


def _facts(
    events: ak.Array, plan: StudyPlan, chosen: NDArray[np.int8]
) -> tuple[str, ...]:
    """Lines of text: class, chi-square, masses and angles."""
    row = reconstruct(events, plan)
    tops = build(events, chosen, plan.pairing, channel=plan.study.channel)
    kind = PairingClass(int(row["pairing_class"][0])).name.lower().replace("_", " ")
    status = Status(int(row["status"][0]))
    stage = int(row["stage"][0])
    lines = [
        f"pairing: {kind}",
        "selected" if not stage else f"not selected: {row.stages[stage - 1]}",
    ]
    if status is not Status.OK:
        lines.append(f"status: {status.name.lower().replace('_', ' ')}")
    if "pairing.chi2" in row:
        lines.append(
            f"χ² {row['pairing.chi2'][0]:.1f},  next + {row['pairing.gap'][0]:.1f}"
        )
    for name in ("top", "antitop"):
        e, px, py, pz = components(tops[name])[:, 0]
        square = e * e - px * px - py * py - pz * pz
        mass = math.sqrt(square) if square > 0 else math.nan
        lines.append(f"{name} mass {mass:.0f} GeV")
    for name, text in (("reco", "reconstructed"), ("true", "generated")):
        value = row[f"cos_theta_{name}"][0]
        if np.isfinite(value):
            lines.append(f"cos θ {text} {value:+.3f}".replace("-", "−"))
    if plan.fit.on:
        result = fit(events, chosen, plan.fit, channel=plan.study.channel)
        state = "has converged" if result.success[0] else "has failed"
        lines.append(f"constrained fit {state}")
    return tuple(lines)
