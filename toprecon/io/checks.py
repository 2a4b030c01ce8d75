"""Which entries are events: the checks at the door.

An entry is rejected only if it cannot be used at all. Events that a selection would
drop (too few jets, no lepton, no generated pair) stay events, because efficiencies
need them; they are counted as notes.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from toprecon.io.raw import Note, RawEvents, Reason

Mask = NDArray[np.bool_]

MASS_FLOOR = 1e-3
"""GeV: p may exceed E by this much whatever the energy (rounding of soft objects)."""


def find_problems(events: RawEvents, *, mass_tolerance: float) -> None:
    """Mark what is wrong with raw events, in ``events.problems``.

    Parameters
    ----------
    events : RawEvents
        One range of entries.
    mass_tolerance : float
        Largest sqrt(p^2 - E^2) as a fraction of E.
    """
    headers = events.headers
    events.mark(Reason.NOT_FINITE, ~np.isfinite(headers.weight))
    with np.errstate(all="ignore"):
        for objects in events.objects.values():
            p = objects.p
            finite = ~_any(~np.isfinite(p))
            for extra in objects.extra.values():
                if extra.dtype.kind == "f":
                    finite &= ~np.isinf(extra)
            events.mark(Reason.NOT_FINITE, objects.events_with(~finite))
            events.mark(Reason.NEGATIVE_ENERGY, objects.events_with(p[0] < 0))
            bad = _spacelike(p, mass_tolerance)
            events.mark(Reason.SPACELIKE, objects.events_with(bad))
        if events.missing is not None:
            events.mark(Reason.NOT_FINITE, _any(np.isinf(events.missing)))
        _check_truth(events, mass_tolerance)
    empty = np.ones(len(events), dtype=bool)
    for name in ("jets", "leptons", "particles"):
        if name in events.objects:
            empty &= events.objects[name].counts == 0
    events.mark(Reason.EMPTY, empty)


def _check_truth(events: RawEvents, mass_tolerance: float) -> None:
    """Check that generated momenta are whole or absent, and physical."""
    if events.truth is None:
        return
    for p in events.truth.p.values():
        absent = np.isnan(p)
        events.mark(Reason.NOT_FINITE, _any(np.isinf(p)))
        events.mark(Reason.BROKEN_TRUTH, _any(absent) & _any(~absent))
        events.mark(Reason.NEGATIVE_ENERGY, p[0] < 0)
        events.mark(Reason.SPACELIKE, _spacelike(p, mass_tolerance))
    events.mark(Reason.NOT_FINITE, np.isinf(events.truth.sqrt_s_prime))


def _any(marked: NDArray[np.bool_]) -> Mask:
    """Tell for which columns one of four components is marked."""
    return marked[0] | marked[1] | marked[2] | marked[3]


def _spacelike(p: NDArray[np.float64], tolerance: float) -> Mask:
    """Whether E^2 < p^2 beyond the tolerance."""
    excess = p[1] * p[1] + p[2] * p[2] + p[3] * p[3]
    excess -= p[0] * p[0]
    return excess > (tolerance * p[0]) ** 2 + MASS_FLOOR**2


def first_reason(problems: dict[Reason, Mask], n: int) -> NDArray[np.int8]:
    """Return the position in :class:`Reason` of the first problem, -1 for an event.

    Parameters
    ----------
    problems : dict of array of bool, shape (n,)
        What is wrong with which entries.
    n : int
        Entries.

    Returns
    -------
    array of int8, shape (n,)
        One reason per entry, so that the counts add up.
    """
    first = np.full(n, -1, dtype=np.int8)
    for position, reason in enumerate(Reason):
        if reason in problems:
            first[problems[reason] & (first < 0)] = position
    return first


def find_notes(events: RawEvents) -> dict[Note, Mask]:
    """Return what is counted of events that are kept.

    Parameters
    ----------
    events : RawEvents
        One range of entries.

    Returns
    -------
    dict of array of bool, shape (E,)
        Only notes that concern some entry.
    """
    jets = events.objects["jets"]
    notes = {
        Note.FEW_JETS: jets.counts < 4,
        Note.NEGATIVE_WEIGHT: events.headers.weight < 0,
    }
    if events.truth is None:
        notes[Note.NO_TRUTH] = np.ones(len(events), dtype=bool)
    else:
        top, antitop = events.truth.p["top"][0], events.truth.p["antitop"][0]
        notes[Note.NO_TRUTH] = ~(np.isfinite(top) & np.isfinite(antitop))
    tag = jets.extra["btag"]
    with np.errstate(invalid="ignore"):
        notes[Note.TAG_RANGE] = jets.events_with((tag < 0) | (tag > 1))
    return {note: mask for note, mask in notes.items() if mask.any()}
