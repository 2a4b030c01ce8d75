"""Containment: are the quarks of a top inside its fat jet."""

from __future__ import annotations

import math

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.boosted.options import BoostedOptions, FatJetAlgorithm
from toprecon.events import Channel, PairingClass, Status, components, has_truth
from toprecon.kinematics import angle

FloatArray = NDArray[np.float64]
BoolArray = NDArray[np.bool_]

_QUARKS = (
    ("b", "w_plus_up", "w_plus_down"),
    ("bbar", "w_minus_up", "w_minus_down"),
)


def contained(
    events: ak.Array, tops: ak.Array, options: BoostedOptions | None = None
) -> BoolArray:
    """Return in which events all quarks of the hadronic tops are inside their fat jets.

    A quark is inside the nearer of the two fat jets; for jets of a limited radius it
    must also be within the radius of the axis. Blind to charge: the all-hadronic tops
    may be exchanged.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events with truth.
    tops : ak.Array, shape (E,)
        Pairs from :func:`find_tops`; their ``fat_jets`` are the axes before grooming.
    options : BoostedOptions, optional
        Those of :func:`find_tops`.

    Returns
    -------
    array of bool, shape (E,)
        False without truth, without fat jets, or if the generated pair has no hadronic
        top where one was looked for.
    """
    options = options or BoostedOptions()
    n = len(events)
    if not has_truth(events).any():
        return np.zeros(n, dtype=bool)
    axes = components(ak.flatten(tops.fat_jets, axis=1)).reshape(4, n, 2)
    side = ak.to_numpy(tops.hadronic_side)
    hadronic = hadronic_tops(events)
    limit = _radius(events, options)
    # inside[t, k]: all quarks of the top (t = 0) or antitop in the fat jet k
    inside = np.zeros((2, 2, n), dtype=bool)
    for t, names in enumerate(_QUARKS):
        to_axis = np.stack(
            [
                [angle(components(events.truth[name]), axes[:, :, k]) for k in (0, 1)]
                for name in names
            ]
        )
        with np.errstate(invalid="ignore"):
            for k in (0, 1):
                nearer = to_axis[:, k] < to_axis[:, 1 - k]
                inside[t, k] = (nearer & (to_axis[:, k] <= limit)).all(axis=0)
    straight = (~hadronic[0] | inside[0, 0]) & (~hadronic[1] | inside[1, 1])
    crossed = (~hadronic[0] | inside[0, 1]) & (~hadronic[1] | inside[1, 0])
    # one hadronic fat jet: it must hold the quarks of the generated hadronic top
    looked_for = np.where(side > 0, 0, 1)
    row = np.arange(n)
    single = np.where(
        hadronic[0], inside[0, looked_for, row], inside[1, looked_for, row]
    )
    one_hadronic = hadronic[0] ^ hadronic[1]
    result = np.where(
        side == 0,
        hadronic.all(axis=0) & (straight | crossed),
        one_hadronic & single,
    )
    return result & has_truth(events) & (ak.to_numpy(tops.status) == Status.OK)


def containment_class(
    events: ak.Array,
    tops: ak.Array,
    options: BoostedOptions | None = None,
    *,
    is_signal_process: BoolArray,
    channel: Channel = Channel.LEPTON_JETS,
) -> NDArray[np.uint8]:
    """Class of boosted pairs in the distortion budget.

    Parameters
    ----------
    events, tops : ak.Array, shape (E,)
        Events, and their pairs from :func:`find_tops`.
    options : BoostedOptions, optional
        Those of :func:`find_tops`.
    is_signal_process : array of bool, shape (E,)
        Whether the sample is top-pair production.
    channel : Channel
        Decay channel that was reconstructed.

    Returns
    -------
    array of uint8, shape (E,)
        Values of :class:`~toprecon.events.PairingClass`: ``NO_TRUTH``,
        ``NOT_SIGNAL``, ``UNMATCHED`` (another channel was generated, or there is no
        pair), ``CORRECT`` or ``LEAKING``.
    """
    known = has_truth(events)
    right_channel = np.zeros(len(events), dtype=bool)
    if known.any():
        n_hadronic = hadronic_tops(events).sum(axis=0)
        right_channel = n_hadronic == (2 if channel is Channel.ALL_HADRONIC else 1)
    usable = right_channel & (ak.to_numpy(tops.status) == Status.OK)
    return np.select(
        [
            ~known,
            ~np.asarray(is_signal_process),
            ~usable,
            contained(events, tops, options),
        ],
        [
            PairingClass.NO_TRUTH,
            PairingClass.NOT_SIGNAL,
            PairingClass.UNMATCHED,
            PairingClass.CORRECT,
        ],
        PairingClass.LEAKING,
    ).astype(np.uint8)


def hadronic_tops(events: ak.Array) -> BoolArray:
    """Return whether the generated top and antitop decay to quarks, shape (2, E)."""
    with np.errstate(invalid="ignore"):
        return np.stack(
            [
                (np.abs(ak.to_numpy(events.truth[name].pdg)) >= 1)
                & (np.abs(ak.to_numpy(events.truth[name].pdg)) <= 6)
                for name in ("w_plus_up", "w_minus_up")
            ]
        )


def decay_opening(events: ak.Array) -> FloatArray:
    """Largest angle of the three decay products of each generated top to its top.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events with truth.

    Returns
    -------
    array, shape (2, E)
        Of the top and of the antitop [rad]; NaN without truth.
    """
    parents = ("top", "antitop")
    return np.stack(
        [
            np.max(
                [
                    angle(
                        components(events.truth[name]), components(events.truth[parent])
                    )
                    for name in names
                ],
                axis=0,
            )
            for parent, names in zip(parents, _QUARKS, strict=True)
        ]
    )


def _radius(events: ak.Array, options: BoostedOptions) -> FloatArray:
    """Largest angle of a quark to the axis of its fat jet, shape (E,)."""
    sqrt_s = ak.to_numpy(events.sqrt_s).astype(np.float64)
    if options.algorithm is not FatJetAlgorithm.INCLUSIVE:
        return np.full(len(sqrt_s), math.pi)
    radius = np.full(len(sqrt_s), options.radius)
    if options.reference_energy > 0:
        radius = np.minimum(radius * options.reference_energy / sqrt_s, math.pi)
    return radius
