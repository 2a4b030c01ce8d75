"""Which columns of a file a layout names."""

from __future__ import annotations

from typing import Any

from toprecon.io.layout import SLOT, FileLayout, MomentumColumns, ObjectColumns

OBJECTS = ("jets", "leptons", "particles", "photons")
"""Sections of a layout with several objects per event."""


def part_branches(part: Any) -> set[str]:
    """Columns that one section names."""
    if isinstance(part, MomentumColumns):
        names = {s.branch for s in part.sources().values() if s.branch}
        if isinstance(part, ObjectColumns):
            names = {
                name.replace(SLOT, str(slot))
                for name in names
                for slot in part.slots or (0,)
            }
            names |= {part.count} if part.count else set()
        return names
    names = set().union(*(part_branches(table) for _, table in part.momenta()))
    prime = part.sqrt_s_prime
    return names | ({prime.branch} if prime is not None and prime.branch else set())


def object_branches(layout: FileLayout) -> set[str]:
    """Columns that the layout names for objects and truth."""
    parts: list[Any] = [t for name in OBJECTS for t in getattr(layout, name)]
    parts += [part for part in (layout.missing, layout.truth) if part]
    return set().union(*(part_branches(part) for part in parts)) if parts else set()


def header_branches(layout: FileLayout) -> set[str]:
    """Columns that the layout names for whole events."""
    event = layout.event
    names = {event.id, event.run, event.number, event.sample, event.checksum}
    names |= {s.branch for s in (event.weight, event.helicity, event.sqrt_s) if s}
    return names - {""}


def mapped_columns(layout: FileLayout) -> dict[str, str]:
    """Return where every quantity comes from.

    Parameters
    ----------
    layout : FileLayout
        Layout of columns.

    Returns
    -------
    dict
        Quantity of Events -> column; constants are left out.
    """
    out: dict[str, str] = {}
    for name in OBJECTS:
        for table in getattr(layout, name):
            for key, source in table.sources().items():
                if source.branch:
                    out.setdefault(f"{name}.{key}", source.branch)
    parts: dict[str, Any] = {"missing": layout.missing}
    if layout.truth is not None:
        parts |= {f"truth.{name}": table for name, table in layout.truth.momenta()}
        if layout.truth.sqrt_s_prime is not None:
            out["truth.sqrt_s_prime"] = layout.truth.sqrt_s_prime.branch
    for name, part in parts.items():
        if part is not None:
            for key, source in part.sources().items():
                out[f"{name}.{key}"] = source.branch
    event = layout.event
    named = {name: getattr(event, name) for name in ("id", "run", "number", "sample")}
    for name in ("weight", "helicity", "sqrt_s"):
        source = getattr(event, name)
        named[name] = source.branch if source is not None else ""
    out |= {f"event.{name}": branch for name, branch in named.items()}
    return {name: branch for name, branch in out.items() if branch}
