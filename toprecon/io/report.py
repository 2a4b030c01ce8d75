"""What became of every entry that was read."""

from __future__ import annotations

import dataclasses
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from toprecon.io.raw import Note, Reason

FIRST_ENTRIES = 5
"""Entries named per reason and file."""


@dataclasses.dataclass(frozen=True)
class Count:
    """How many entries of one file, and the first of them."""

    number: int
    first: tuple[int, ...]

    def __add__(self, other: Count) -> Count:
        first = tuple(sorted({*self.first, *other.first})[:FIRST_ENTRIES])
        return Count(self.number + other.number, first)

    @classmethod
    def of(cls, mask: NDArray[np.bool_], start: int) -> Self:
        """Count marked entries of a range that begins at ``start``."""
        where = np.flatnonzero(mask)
        return cls(len(where), tuple(int(i) + start for i in where[:FIRST_ENTRIES]))


@dataclasses.dataclass(frozen=True)
class InputReport:
    """Entries read, events made, and the reasons for the difference.

    Parameters
    ----------
    entries : int
        Entries read.
    accepted : int
        Events made of them.
    rejected : dict
        Reason -> file -> count; these entries are no events.
    noted : dict
        Note -> file -> count; these are events.
    messages : tuple of str
        What should be known of whole files.
    """

    entries: int = 0
    accepted: int = 0
    rejected: dict[Reason, dict[str, Count]] = dataclasses.field(default_factory=dict)
    noted: dict[Note, dict[str, Count]] = dataclasses.field(default_factory=dict)
    messages: tuple[str, ...] = ()

    def __add__(self, other: InputReport) -> InputReport:
        return InputReport(
            self.entries + other.entries,
            self.accepted + other.accepted,
            _added(self.rejected, other.rejected),
            _added(self.noted, other.noted),
            tuple(dict.fromkeys((*self.messages, *other.messages))),
        )

    @property
    def n_rejected(self) -> int:
        """Entries that are no events."""
        return self.entries - self.accepted

    def count(self, reason: Reason | Note | str) -> int:
        """Return how many entries were rejected for a reason, or carry a note."""
        tables: dict[Any, dict[str, Count]] = {**self.rejected, **self.noted}
        return sum(count.number for count in tables.get(reason, {}).values())

    def __str__(self) -> str:
        lines = [f"{self.accepted} events of {self.entries} entries"]
        for verb, table in (("rejected", self.rejected), ("kept", self.noted)):
            for reason, files in table.items():
                for path, count in files.items():
                    named = ", ".join(str(i) for i in count.first)
                    more = ", ..." if count.number > len(count.first) else ""
                    lines.append(
                        f"  {verb} {count.number} {reason}: {path} "
                        f"({'entry' if count.number == 1 else 'entries'} {named}{more})"
                    )
        return "\n".join([*lines, *(f"  {message}" for message in self.messages)])

    def to_mapping(self) -> dict[str, Any]:
        """Return plain data."""
        return {
            "entries": self.entries,
            "accepted": self.accepted,
            "rejected": _plain(self.rejected),
            "noted": _plain(self.noted),
            "messages": list(self.messages),
        }

    @classmethod
    def from_mapping(cls, data: dict[str, Any]) -> Self:
        """Return the report described by :meth:`to_mapping`."""
        return cls(
            data["entries"],
            data["accepted"],
            {Reason(k): _counts(v) for k, v in data["rejected"].items()},
            {Note(k): _counts(v) for k, v in data["noted"].items()},
            tuple(data["messages"]),
        )


def _added(a: dict[Any, dict[str, Count]], b: dict[Any, dict[str, Count]]) -> Any:
    """Sum of two tables of counts."""
    out = {reason: dict(files) for reason, files in a.items()}
    for reason, files in b.items():
        known = out.setdefault(reason, {})
        for path, count in files.items():
            known[path] = known[path] + count if path in known else count
    return out


def _plain(table: dict[Any, dict[str, Count]]) -> dict[str, Any]:
    """Return a table of counts as plain data."""
    return {
        str(reason): {path: [c.number, list(c.first)] for path, c in files.items()}
        for reason, files in table.items()
    }


def _counts(files: dict[str, Any]) -> dict[str, Count]:
    """Return counts from plain data."""
    return {
        path: Count(number, tuple(first)) for path, (number, first) in files.items()
    }
