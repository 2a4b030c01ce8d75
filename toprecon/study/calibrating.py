"""Calibration of the pairing in one call: events in, a plan that uses them out."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Iterable, Iterator
from enum import StrEnum
from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.errors import OptionError, StudyError
from toprecon.events import Channel, PairingClass, has_truth, samples_of
from toprecon.io import read_chunk
from toprecon.pairing import (
    Calibration,
    PairingOptions,
    ScoreKind,
    TagUse,
    calibrate,
    pair,
)
from toprecon.resampling import in_half_a
from toprecon.selection import select
from toprecon.statistics import Measured, weighted_share
from toprecon.study.branches import is_signal_process
from toprecon.study.plan import StudyPlan
from toprecon.study.reading import opened
from toprecon.truth import classify, closest_assignment

MOST_EVENTS = 100_000
"""Selected events used per sample; more change the result by less than its error."""

LEAST_RIGHT = 200
"""Matched events of half A below which densities would be noise."""

Progress = Callable[[int, int], Any]

_PAIRED = [PairingClass.CORRECT, PairingClass.B_SWAPPED, PairingClass.W_MIXED]


@dataclasses.dataclass(frozen=True)
class CalibrationQuality:
    """What a calibration brings, on events that it has not seen.

    Parameters
    ----------
    sqrt_s : float
        Collision energy [GeV].
    sample : str
        Name of the sample.
    before, after : Measured
        Fraction paired right without and with it, among the selected, matched events
        of half B.
    events : int
        Number of those.
    """

    sqrt_s: float
    sample: str
    before: Measured
    after: Measured
    events: int


@dataclasses.dataclass(frozen=True)
class CalibratedPlan:
    """A plan with calibrations, and how good they are.

    Parameters
    ----------
    plan : StudyPlan
        Ready to be used and saved.
    quality : tuple of CalibrationQuality
        One row per sample.
    """

    plan: StudyPlan
    quality: tuple[CalibrationQuality, ...]

    def __str__(self) -> str:
        lines = [
            f"{'sample':24} {'sqrt(s)':>8} {'events':>8}   right before -> after",
        ]
        lines += [
            f"{q.sample:24} {q.sqrt_s:8g} {q.events:8d}   {q.before} -> {q.after}"
            for q in self.quality
        ]
        lines.append("Denominator: selected, matched events of half B.")
        return "\n".join(lines)


def calibrate_plan(
    source: Any,
    plan: StudyPlan,
    *,
    score: str = ScoreKind.RATIO.value,
    charges: bool | None = None,
    tags: str = TagUse.LIKELIHOOD.value,
    layout: Any = None,
    catalogue: Any = None,
    most: int = MOST_EVENTS,
    progress: Progress | None = None,
) -> CalibratedPlan:
    """Calibrate the pairing of a plan with simulated events of known pairing.

    Half A of the selected events (by identity) whose quarks all have a jet of their own
    within ``truth.match_angle`` gives the densities, one calibration per collision
    energy, all beam helicities together. Half B says what they bring.

    Parameters
    ----------
    source : EventSource, events, path or list of paths
        Top pairs with truth; other processes are left out.
    plan : StudyPlan
        Its selection, channel and pairing are those of the calibration.
    score : str
        ``"ratio"``, ``"correlated"`` or ``"plain"`` (new targets and resolutions only).
    charges : bool, optional
        Lepton+jets: use the charges of the b jets. Yes if absent, where they are
        measured.
    tags : str
        ``"likelihood"``, which also allows a jet with a lower b score to be the b jet,
        ``"mask"`` or ``"ignore"``.
    layout, catalogue : optional
        How to read files, see :func:`toprecon.open_events`.
    most : int
        Selected events used per sample.
    progress : callable, optional
        Called with (chunks done, chunks in all).

    Returns
    -------
    CalibratedPlan
        The plan and its quality.

    Raises
    ------
    OptionError
        If ``score`` or ``tags`` is something else.
    StudyError
        If there are too few matched events at some energy.

    Examples
    --------
    ::

        found = calibrate_plan(files, plan)
        print(found)
        found.plan.save("plan.toml")
    """
    _check(score, ScoreKind, "score")
    _check(tags, TagUse, "tags")
    channel = plan.study.channel
    use = TagUse(tags)
    # densities of all assignments that are allowed; the b scores weigh them later
    allowed = TagUse.MASK if use is TagUse.MASK else TagUse.IGNORE
    start = plan.pairing.replace(tags=allowed)
    parts: dict[float, list[ak.Array]] = {}
    for events in _chunks(source, layout, catalogue, most, plan, progress):
        for energy in np.unique(ak.to_numpy(events.sqrt_s)):
            part = events[ak.to_numpy(events.sqrt_s) == energy]
            parts.setdefault(float(energy), []).append(part)
    if not parts:
        msg = (
            "calibration: selected top pairs with truth are required; got none; check "
            "the selection of the plan and the process of the samples"
        )
        raise StudyError(msg)
    wanted = {energy: ak.concatenate(parts[energy]) for energy in sorted(parts)}
    tables = [_calibration(e, events, start, plan) for e, events in wanted.items()]
    if charges is None:
        have = all(_has_charges(events) for events in wanted.values())
        charges = channel is Channel.LEPTON_JETS and have
    new = plan.pairing.calibrated(
        *tables, score=ScoreKind(score), charges=charges, tags=use
    )
    quality = [
        row
        for energy, events in wanted.items()
        for row in _quality(energy, events, plan, plan.pairing, new)
    ]
    return CalibratedPlan(plan.replace(pairing=new), tuple(quality))


def _check(value: str, kind: type[StrEnum], name: str) -> None:
    """Refuse a word that is none of those known."""
    known = [item.value for item in kind]
    if value not in known:
        msg = f"calibration: {name} must be one of {', '.join(known)}; got {value!r}"
        raise OptionError(msg)


def _chunks(
    source: Any,
    layout: Any,
    catalogue: Any,
    most: int,
    plan: StudyPlan,
    progress: Progress | None,
) -> Iterator[ak.Array]:
    """Yield usable events, at most so many of every sample."""
    source = opened(source, layout=layout, catalogue=catalogue)
    if isinstance(source, ak.Array):
        names = [s.name for s in samples_of(source)]
        sample = ak.to_numpy(source.sample)
        for index in range(len(names)):
            yield _usable(source[sample == index], plan)[:most]
        return
    refs = sorted(source.references())
    found: dict[str, int] = {}
    for done, ref in enumerate(refs, 1):
        left = most - found.get(ref.sample, 0)
        if left > 0:
            events = _usable(read_chunk(ref, source.description)[0], plan)[:left]
            found[ref.sample] = found.get(ref.sample, 0) + len(events)
            yield events
        if progress is not None:
            progress(done, len(refs))


def _usable(events: ak.Array, plan: StudyPlan) -> ak.Array:
    """Return the selected signal events with truth."""
    channel = plan.study.channel
    keep = is_signal_process(events) & has_truth(events)
    if keep.any():
        keep &= select(events, plan.selection, channel=channel).stage == 0
    return events[keep]


def _has_charges(events: ak.Array) -> bool:
    """Whether charges of jets were measured."""
    names = {"vertex_charge", "track_charge"}
    if not names <= set(events.jets.fields):
        return False
    return any(
        np.isfinite(ak.to_numpy(ak.flatten(events.jets[n]))).any() for n in names
    )


def _calibration(
    energy: float, events: ak.Array, options: PairingOptions, plan: StudyPlan
) -> Calibration:
    """Calibrate one energy on half A."""
    channel = plan.study.channel
    matching = closest_assignment(events, channel=channel)
    matched = matching.angle < plan.truth.match_angle
    n = int((matched & in_half_a(ak.to_numpy(events.id))).sum())
    if n < LEAST_RIGHT:
        msg = (
            f"calibration at {energy:g} GeV: at least {LEAST_RIGHT} selected, matched "
            f"events of half A are required; got {n}; give more events, or calibrate "
            "only energies that can be resolved"
        )
        raise StudyError(msg)
    known = np.where(matched[:, None], matching.assignment, -1).astype(np.int8)
    try:
        return calibrate(events, known, options, channel=channel)
    except OptionError as error:
        msg = f"calibration at {energy:g} GeV: {error}"
        raise StudyError(msg) from error


def _quality(
    energy: float,
    events: ak.Array,
    plan: StudyPlan,
    before: PairingOptions,
    after: PairingOptions,
) -> Iterable[CalibrationQuality]:
    """Fraction right of every sample on half B."""
    channel = plan.study.channel
    half_b = events[~in_half_a(ak.to_numpy(events.id))]
    matching = closest_assignment(half_b, channel=channel)

    def kinds(options: PairingOptions) -> NDArray[np.uint8]:
        return classify(
            ak.to_numpy(pair(half_b, options, channel=channel).assignment),
            matching.assignment,
            has_truth=has_truth(half_b),
            is_signal_process=np.ones(len(half_b), dtype=bool),
            matched=matching.angle < plan.truth.match_angle,
            channel=channel,
        )

    one, two = kinds(before), kinds(after)
    names = [s.name for s in samples_of(half_b)]
    sample = ak.to_numpy(half_b.sample)
    for index in np.unique(sample):
        use = np.isin(one, _PAIRED) & (sample == index)
        weight = np.ones(int(use.sum()))
        yield CalibrationQuality(
            sqrt_s=energy,
            sample=names[index],
            before=weighted_share(weight, one[use] == PairingClass.CORRECT),
            after=weighted_share(weight, two[use] == PairingClass.CORRECT),
            events=len(weight),
        )
