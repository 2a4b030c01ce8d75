"""Sums after a moved cut, from the few rows that the move lets in or throws out.

Everything in the sums is additive over rows. A cut that moves changes the fate of the
rows between its old and its new limit only, so the new sums are the old ones, plus
those rows summed with the new plan, minus the same rows summed with the old plan.
Nothing of what the sums mean is repeated here. With weights that are not whole
numbers the result differs from :func:`toprecon.study.summarise` by rounding, so a
live study works it out in full once the control rests.
"""

from __future__ import annotations

import dataclasses
from typing import Any

import numpy as np

from toprecon.events import CutFlow, EventTable, Sample
from toprecon.study.cutting import passes_cut
from toprecon.study.plan import StudyPlan
from toprecon.study.sums import StudySums, summarise

LARGEST_MOVE = 0.1
"""Share of the rows beyond which the full sums are as quick."""

ROUNDING = 1e-11
"""What is left of a sum from which everything was taken, relative to the sum."""


def moved_cut(old: StudyPlan, new: StudyPlan) -> int | None:
    """Find the one active cut by whose limits two plans differ.

    Parameters
    ----------
    old, new : StudyPlan
        Two plans.

    Returns
    -------
    int or None
        Position in ``cuts``; None if anything else differs, or nothing does.
    """
    if old.replace(cuts=()) != new.replace(cuts=()) or len(old.cuts) != len(new.cuts):
        return None
    changed = [
        i for i, (a, b) in enumerate(zip(old.cuts, new.cuts, strict=True)) if a != b
    ]
    if len(changed) != 1:
        return None
    a, b = old.cuts[changed[0]], new.cuts[changed[0]]
    same = a.observable == b.observable and a.on and b.on
    return changed[0] if same else None


def moved_sums(
    sums: StudySums, table: EventTable, old: StudyPlan, new: StudyPlan
) -> StudySums | None:
    """Return the sums for a plan in which one cut has moved.

    Parameters
    ----------
    sums : StudySums
        Of ``table`` with the old plan.
    table : EventTable
        The table.
    old, new : StudyPlan
        The plans before and after.

    Returns
    -------
    StudySums or None
        Equal to ``summarise(table, new)`` up to rounding; None if more than the limits
        of one cut differ, or if so many rows change that nothing would be saved.
    """
    position = moved_cut(old, new)
    if position is None or sums.plan_hash != old.hash:
        return None
    before = passes_cut(table, old.cuts[position])
    after = passes_cut(table, new.cuts[position])
    rows = np.flatnonzero(before ^ after)
    if len(rows) > LARGEST_MOVE * len(table):
        return None
    part = _lean(table, new).take(rows)
    gained, lost = summarise(part, new), summarise(part, old)
    samples = {
        name: _moved(sums.samples[name], gained.samples[name], lost.samples[name])
        for name in sums.samples
    }
    return StudySums(new.hash, samples)


def _lean(table: EventTable, plan: StudyPlan) -> EventTable:
    """Drop the observables that no cut asks for."""
    wanted = {cut.observable for cut in plan.active_cuts}
    columns = {n: c for n, c in table.columns.items() if "." not in n or n in wanted}
    return dataclasses.replace(table, columns=columns)


def _moved(base: Any, gained: Any, lost: Any) -> Any:
    """Return base + gained - lost, for whatever a set of sums is made of."""
    if isinstance(base, Sample):
        return base  # describes the sample as a whole
    if isinstance(base, CutFlow):
        changes = {
            name: _moved(
                getattr(base, name), getattr(gained, name), getattr(lost, name)
            )
            for name in ("counts", "sums", "variances")
        }
        return CutFlow(steps=gained.steps, **changes)
    if isinstance(base, np.ndarray):
        return _moved_array(base, gained, lost)
    if isinstance(base, dict):
        return {
            name: _moved(value, gained.get(name, 0), lost.get(name, 0))
            for name, value in base.items()
        }
    if isinstance(base, int):
        return base + gained - lost
    if dataclasses.is_dataclass(base) and hasattr(base, "__add__"):
        names = [field.name for field in dataclasses.fields(base)]
        changes = {
            n: _moved(getattr(base, n), getattr(gained, n), getattr(lost, n))
            for n in names
        }
        return dataclasses.replace(base, **changes)  # type: ignore[type-var]
    return base  # bins and names


def _moved_array(base: Any, gained: Any, lost: Any) -> Any:
    """Return base + gained - lost; what only rounding leaves becomes zero."""
    out = base + gained - lost
    if out.dtype.kind == "f":
        size = np.maximum(np.abs(base), np.abs(gained))
        out[np.abs(out) <= ROUNDING * np.maximum(size, np.abs(lost))] = 0.0
    return out
