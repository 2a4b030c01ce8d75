"""Calibration of the pairing from events whose right assignment is known."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.errors import OptionError
from toprecon.events import Channel, Status
from toprecon.pairing.calibration import Calibration
from toprecon.pairing.densities import fit_mixture
from toprecon.pairing.engine import Group, hadronic_legs, leptonic_legs
from toprecon.pairing.hypotheses import Hypotheses, hypotheses
from toprecon.pairing.joint import leg_values
from toprecon.pairing.likelihoods import (
    ChargeLikelihood,
    charges_of,
    fit_charge,
    fit_tag,
)
from toprecon.pairing.names import HADRONIC_TERMS, TermName, TermOptions
from toprecon.pairing.objects import Objects, read_objects
from toprecon.pairing.options import PairingOptions, ScoreKind, TagUse
from toprecon.pairing.scoring import Judge
from toprecon.resampling import in_half_a

FloatArray = NDArray[np.float64]
BoolArray = NDArray[np.bool_]

NAMES = (
    TermName.W_MASS,
    TermName.HADRONIC_TOP_MASS,
    TermName.LEPTONIC_W_MASS,
    TermName.LEPTONIC_TOP_MASS,
)
"""Quantities of lepton+jets densities: the masses, which are not redundant."""

NAMES_HADRONIC = (
    TermName.W_MASS,
    TermName.HADRONIC_TOP_MASS,
    TermName.B_W_ANGLE,
)
"""Quantities of one side in all-hadronic densities."""

N_BINS_TAG = 20


def calibrate(
    events: ak.Array,
    assignment: NDArray[np.int8],
    options: PairingOptions | None = None,
    *,
    channel: Channel = Channel.LEPTON_JETS,
    names: tuple[TermName, ...] | None = None,
    n_components: int = 8,
    half_a_only: bool = True,
) -> Calibration:
    """Fit densities of right and wrong assignments to events with a known answer.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events of one collision energy, with a wide choice of beam helicities.
    assignment : array of int8, shape (E, 6)
        Right assignment; all -1 where it is not known (no match), such events are left
        out. Events in which the b scores forbid it are used for the single-jet
        likelihoods alone.
    options : PairingOptions, optional
        Neutrino and use of the b scores: wrong assignments are those that these allow.
    channel : Channel
        Decay channel.
    names : tuple of TermName, optional
        Quantities of the densities. All-hadronic: those of a hadronic side.
    n_components : int
        Components of each mixture.
    half_a_only : bool
        Use the half of the events with :func:`~toprecon.resampling.in_half_a` of their
        id only, so that the other half can tell how good the result is.

    Returns
    -------
    Calibration
        Plain numbers, to be put into the options with
        :meth:`PairingOptions.calibrated`.

    Raises
    ------
    OptionError
        If the events have several collision energies, or too few are usable.
    """
    options = options or PairingOptions()
    tags = TagUse.MASK if options.tags is TagUse.MASK else TagUse.IGNORE
    options = options.replace(
        score=ScoreKind.PLAIN, charges=False, calibrations=(), tags=tags
    )
    assignment = np.asarray(assignment)
    usable = (assignment >= 0).any(axis=1)
    if half_a_only:
        usable &= in_half_a(ak.to_numpy(events.id))
    objects = read_objects(events, options, channel)
    usable &= objects.status == Status.OK
    energies = objects.sqrt_s[usable]
    if not len(energies) or np.ptp(energies) > 1e-3 * energies[0]:
        found = (
            ", ".join(f"{e:g}" for e in np.unique(energies)[:5]) or "no usable events"
        )
        msg = (
            "calibrate: events of one collision energy with known assignments are "
            f"required; got {found}; calibrate every energy by itself"
        )
        raise OptionError(msg)
    usual = NAMES if channel is Channel.LEPTON_JETS else NAMES_HADRONIC
    names = tuple(name for name in TermName if name in (names or usual))
    right, wrong = _samples(objects, assignment, usable, options, channel, names)
    every = tuple(
        n for n in TermName if channel is Channel.LEPTON_JETS or n in HADRONIC_TERMS
    )
    raw, _ = _samples(objects, assignment, usable, options, channel, every, plain=True)
    jets = objects.offsets[:-1, None] + assignment
    b, bbar = jets[usable, 0], jets[usable, 3]
    fields = set(events.jets.fields)
    charge: dict[str, ChargeLikelihood] = {}
    if {"vertex_charge", "track_charge"} <= fields:
        parts = [np.concatenate([c[bbar], -c[b]]) for c in charges_of(events)]
        charge["charge"] = fit_charge(*parts)
    is_b = np.zeros(objects.jets.shape[1], dtype=bool)
    is_b[b] = is_b[bbar] = True
    among = np.repeat(usable, np.diff(objects.offsets))
    return Calibration(
        channel=channel,
        sqrt_s=float(energies[0]),
        names=names,
        terms=tuple(_term(n, row) for n, row in zip(every, raw, strict=True)),
        gaussian=fit_mixture(right, 1),
        right=fit_mixture(right, n_components),
        wrong=fit_mixture(wrong, n_components),
        tag=fit_tag(objects.btag[among], is_b[among], N_BINS_TAG),
        n_right=right.shape[1],
        n_wrong=wrong.shape[1],
        **charge,
    )


def _samples(
    objects: Objects,
    assignment: NDArray[np.int8],
    usable: BoolArray,
    options: PairingOptions,
    channel: Channel,
    names: tuple[TermName, ...],
    *,
    plain: bool = False,
) -> tuple[FloatArray, FloatArray]:
    """Quantities of right and of wrong allowed hypotheses, shape (D, N) each."""
    judge = Judge(options, channel, None)
    kept: tuple[list[FloatArray], list[FloatArray]] = ([], [])
    for all_rows, all_positions in objects.groups(options.cap):
        part = usable[all_rows]
        rows, positions = all_rows[part], all_positions[part]
        table = hypotheses(channel, positions.shape[1])
        group = judge.group(objects, rows, positions, None)
        index = positions - objects.offsets[rows][:, None]
        right = is_right(index, table, assignment[rows])
        ok = _allowed(group, table)
        ok &= (right & ok).any(axis=0)  # the right one among the allowed ones
        sqrt_s = np.ones(len(rows)) if plain else objects.sqrt_s[rows]
        for values, row in _values(group, table, names, sqrt_s, plain=plain):
            kept[0].append(values[:, ok[row] & right[row]])
            kept[1].append(values[:, ok[row] & ~right[row]])
    empty = np.empty((len(names), 0))
    one, two = (np.concatenate(k, axis=1) if k else empty for k in kept)
    return one, two


def _allowed(group: Group, table: Hypotheses) -> BoolArray:
    """Which hypotheses the b scores allow, shape (P, E)."""
    if group.b_penalty is None or group.w_penalty is None:
        return np.ones((len(table), len(group)), dtype=bool)
    is_b = np.isfinite(group.b_penalty)
    ok = np.ones((len(table), len(group)), dtype=bool)
    for row, jets in enumerate(table.assignments.tolist()):
        for place, jet in enumerate(jets):
            if jet >= 0:
                ok[row] &= is_b[jet] if place in {0, 3} else ~is_b[jet]
    return ok


def _values(
    group: Group,
    table: Hypotheses,
    names: tuple[TermName, ...],
    sqrt_s: FloatArray,
    *,
    plain: bool,
) -> Iterator[tuple[FloatArray, int]]:
    """Yield the quantities and the row of every hypothesis; all-hadronic: every side."""
    all_events = slice(0, len(group))
    first = [
        leg_values(leg, names, sqrt_s, plain=plain)
        for _, _, leg in hadronic_legs(group, table, all_events)
    ]
    second = [
        leg_values(leg, names, sqrt_s, plain=plain)
        for _, leg in leptonic_legs(group, table, all_events)
    ]
    for row, (one, two) in enumerate(table.rows.tolist()):
        if table.is_leptonic:
            yield np.concatenate([first[one], second[two]]), row
        else:
            yield first[one], row
            yield first[two], row


def is_right(
    index: NDArray[np.int64], table: Hypotheses, truth: NDArray[np.int8]
) -> BoolArray:
    """Return which hypotheses are the right ones, blind to which is the top, (P, E)."""
    chosen = np.where(
        table.assignments[:, None] < 0, -1, index.T[table.assignments].swapaxes(1, 2)
    )
    result = np.zeros(chosen.shape[:2], dtype=bool)
    for order in ([0, 1, 2, 3, 4, 5], [3, 4, 5, 0, 1, 2]):
        true = _sorted_sides(truth[:, order])
        result |= (_sorted_sides(chosen) == true).all(axis=-1)
    return result


def _sorted_sides(assignment: NDArray[Any]) -> NDArray[Any]:
    """Return assignments with the W jets of each side in order."""
    b1, w1 = assignment[..., :1], np.sort(assignment[..., 1:3], axis=-1)
    b2, w2 = assignment[..., 3:4], np.sort(assignment[..., 4:6], axis=-1)
    return np.concatenate([b1, w1, b2, w2], axis=-1)


def _term(name: TermName, values: FloatArray) -> TermOptions:
    """Target (centre of the shortest half) and 68 % intervals on its two sides."""
    x = np.sort(values[np.isfinite(values)])
    half = len(x) // 2
    start = int(np.argmin(x[half:] - x[: len(x) - half]))
    target = float(np.median(x[start : start + half + 1]))
    below, above = target - x[x < target], x[x > target] - target
    return TermOptions(
        name=name,
        target=target,
        below=max(float(np.quantile(below, 0.683)), 1e-6),
        above=max(float(np.quantile(above, 0.683)), 1e-6),
    )
