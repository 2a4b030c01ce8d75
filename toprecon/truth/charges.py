"""The true charge: whether the candidate called the top is one."""

from __future__ import annotations

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.events import Channel, components, has_truth
from toprecon.kinematics import angle
from toprecon.truth.matching import Matching, closest_assignment, hadronic_sides
from toprecon.truth.options import TruthOptions

FloatArray = NDArray[np.float64]


def true_sign(
    events: ak.Array,
    tops: ak.Array,
    *,
    channel: Channel = Channel.LEPTON_JETS,
    matching: Matching | None = None,
    options: TruthOptions | None = None,
) -> FloatArray:
    """Return the factor that turns the measured charge into the true one.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events with truth.
    tops : ak.Array, shape (E,)
        Reconstructed pairs; ``assignment`` and ``hadronic_side`` say which candidate
        is called the top.
    channel : Channel
        Lepton+jets: the generated lepton decides which side is the top.
        All-hadronic: the true b jet in the candidate.
    matching : Matching, optional
        :func:`closest_assignment` of the events, if it is at hand.
    options : TruthOptions, optional
        Its ``match_angle`` says when a jet is a true b jet.

    Returns
    -------
    array, shape (E,)
        +1 where the candidate called the top is the top, -1 where it is the antitop,
        NaN without truth or without candidates. If a candidate holds both true b jets
        or neither is found, and in lepton+jets if the generated pair has not just one
        lepton, the candidates nearer to the generated tops decide.
    """
    known = has_truth(events)
    if not known.any():
        return np.full(len(events), np.nan)
    sign = np.zeros(len(events))
    if channel is Channel.LEPTON_JETS:
        top, antitop = hadronic_sides(events)
        true_side = top.astype(np.int8) - antitop.astype(np.int8)
        sign = ak.to_numpy(tops.hadronic_side) * true_side.astype(float)
    else:
        matching = matching or closest_assignment(events, channel=channel)
        sign = _from_b_jets(ak.to_numpy(tops.assignment), matching, options)
    nearer = _nearer(events, tops)
    return np.where(known, np.where(sign == 0, nearer, sign), np.nan)


def _from_b_jets(
    assignment: NDArray[np.int8], matching: Matching, options: TruthOptions | None
) -> FloatArray:
    """+1 or -1 by the true b jets in the candidates, 0 where they do not say."""
    limit = (options or TruthOptions()).match_angle
    votes = np.zeros(len(assignment))
    for column, sign in ((0, 1.0), (3, -1.0)):
        with np.errstate(invalid="ignore"):
            found = matching.angles[:, column] < limit
        jet = np.where(found, matching.assignment[:, column], -2)[:, None]
        in_top = (assignment[:, :3] == jet).any(axis=1)
        in_antitop = (assignment[:, 3:] == jet).any(axis=1)
        votes += sign * (in_top.astype(float) - in_antitop.astype(float))
    return np.sign(votes)


def _nearer(events: ak.Array, tops: ak.Array) -> FloatArray:
    """+1 if the candidates are nearer to the tops they are called, else -1."""
    true = components(events.truth.top), components(events.truth.antitop)
    found = components(tops.top), components(tops.antitop)
    straight = angle(found[0], true[0]) + angle(found[1], true[1])
    crossed = angle(found[0], true[1]) + angle(found[1], true[0])
    result = np.where(straight <= crossed, 1.0, -1.0)
    return np.where(np.isfinite(straight + crossed), result, np.nan)
