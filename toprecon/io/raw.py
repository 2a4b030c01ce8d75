"""What every reader gives: plain arrays, before any check.

Values are in GeV and rad, in the coordinate system of the file. Nothing is dropped
here; entries that a reader cannot make sense of are marked in ``problems``.
"""

from __future__ import annotations

import dataclasses
from enum import StrEnum
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from toprecon.events import Sample

FloatArray = NDArray[np.float64]


class Reason(StrEnum):
    """Why an entry of a file is no event; tested in this order."""

    DAMAGED = "stored checksum does not fit"
    INCONSISTENT = "inconsistent counts"
    UNKNOWN_VALUE = "value not in the map of the layout"
    NOT_FINITE = "NaN or infinity"
    BROKEN_TRUTH = "incomplete truth momentum"
    NEGATIVE_ENERGY = "negative energy"
    SPACELIKE = "E^2 < p^2"
    EMPTY = "no object"
    DUPLICATE = "duplicate id"


class Note(StrEnum):
    """What is counted of accepted events; they stay events."""

    NO_TRUTH = "without a generated pair"
    FEW_JETS = "with fewer than four jets"
    NEGATIVE_WEIGHT = "of negative weight"
    TAG_RANGE = "with a b score outside 0 to 1"


@dataclasses.dataclass
class RawObjects:
    """Objects of all events, one after another.

    Parameters
    ----------
    p : array, shape (4, N)
        E, px, py, pz [GeV].
    counts : array of int, shape (E,)
        Objects per event.
    extra : dict of array, shape (N,)
        Further quantities.
    """

    p: FloatArray
    counts: NDArray[np.int64]
    extra: dict[str, NDArray[Any]]

    @property
    def offsets(self) -> NDArray[np.int64]:
        """Where the objects of each event begin, shape (E + 1,)."""
        offsets = np.zeros(len(self.counts) + 1, dtype=np.int64)
        np.cumsum(self.counts, out=offsets[1:])
        return offsets

    def events_with(self, marked: NDArray[np.bool_]) -> NDArray[np.bool_]:
        """Return which events have a marked object, shape (E,)."""
        found = np.zeros(len(self.counts), dtype=bool)
        where = np.flatnonzero(marked)
        if len(where):
            found[np.searchsorted(self.offsets, where, side="right") - 1] = True
        return found

    def keep_objects(self, mask: NDArray[np.bool_]) -> RawObjects:
        """Return these objects only."""
        if mask.all():
            return self
        running = np.concatenate([[0], np.cumsum(mask)])
        counts = np.diff(running[self.offsets])
        extra = {name: values[mask] for name, values in self.extra.items()}
        return RawObjects(self.p[:, mask], counts, extra)

    def keep_events(self, mask: NDArray[np.bool_]) -> RawObjects:
        """Return the objects of these events, and only these events."""
        kept = self.keep_objects(np.repeat(mask, self.counts))
        return RawObjects(kept.p, self.counts[mask], kept.extra)

    @classmethod
    def joined(cls, parts: list[RawObjects]) -> RawObjects:
        """Return the objects of several lists, event by event, in list order."""
        if len(parts) == 1:
            return parts[0]
        event = np.concatenate(
            [np.repeat(np.arange(len(part.counts)), part.counts) for part in parts]
        )
        order = np.argsort(event, kind="stable")
        extra = {
            name: np.concatenate([part.extra[name] for part in parts])[order]
            for name in parts[0].extra
        }
        p = np.concatenate([part.p for part in parts], axis=1)[:, order]
        return cls(p, np.sum([part.counts for part in parts], axis=0), extra)

    @classmethod
    def none(cls, n: int, extra: dict[str, Any]) -> RawObjects:
        """Return n events without objects; ``extra`` gives names and types."""
        empty = {name: np.zeros(0, dtype=kind) for name, kind in extra.items()}
        return cls(np.zeros((4, 0)), np.zeros(n, dtype=np.int64), empty)


@dataclasses.dataclass
class RawHeaders:
    """Quantities of whole events, shape (E,) each; what the file lacks is None."""

    weight: FloatArray
    helicity: NDArray[np.int8]
    sqrt_s: FloatArray
    run: NDArray[np.int64] | None = None
    number: NDArray[np.int64] | None = None
    id: NDArray[np.uint64] | None = None
    sample: NDArray[np.int64] | None = None

    def __len__(self) -> int:
        return len(self.weight)


@dataclasses.dataclass
class RawTruth:
    """Generated momenta (4, E) by name; NaN where there is none.

    ``pdg`` holds codes for the four fermions of the W decays, 0 where not known.
    """

    p: dict[str, FloatArray]
    pdg: dict[str, NDArray[np.int32]]
    sqrt_s_prime: FloatArray


@dataclasses.dataclass
class RawEvents:
    """One range of entries.

    ``visible``, the summed momentum of all particles, stands in for a missing momentum
    that is not stored: it is the initial state less that.
    """

    headers: RawHeaders
    objects: dict[str, RawObjects]
    missing: FloatArray | None
    truth: RawTruth | None
    problems: dict[Reason, NDArray[np.bool_]]
    visible: FloatArray | None = None

    def __len__(self) -> int:
        return len(self.headers)

    def mark(self, reason: Reason, mask: NDArray[np.bool_]) -> None:
        """Note a problem of some entries."""
        if mask.any():
            known = self.problems.get(reason)
            self.problems[reason] = mask if known is None else known | mask


class Reader(Protocol):
    """One open file.

    ``optional`` names those of particles, photons, missing and truth that the file
    has; ``samples`` are the descriptions stored in the file, if any.
    """

    n_entries: int
    samples: tuple[Sample, ...]
    optional: frozenset[str]
    notes: list[str]
    warnings: list[str]

    def headers(self, start: int, stop: int) -> RawHeaders:
        """Return the quantities of whole events of a range of entries."""

    def read(self, start: int, stop: int) -> RawEvents:
        """Return a range of entries."""

    def close(self) -> None:
        """Close the file."""


EXTRAS: dict[str, dict[str, Any]] = {
    "jets": {
        "btag": np.float64,
        "track_charge": np.float64,
        "vertex_charge": np.float64,
    },
    "leptons": {"charge": np.float64, "pdg": np.int32, "isolation": np.float64},
    "particles": {"charge": np.float64, "kind": np.int8, "jet_index": np.int32},
    "photons": {},
}
"""Further quantities of the objects, and their types."""

OPTIONAL = ("particles", "photons", "missing", "truth")
