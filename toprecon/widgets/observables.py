"""Choices of observables: those that the table at hand has."""

from __future__ import annotations

from typing import Any

from toprecon.study import OBSERVABLES, LiveStudy, Observable, StudyPlan

BY_NAME = {item.name: item for item in OBSERVABLES}
USUALLY_CUT_FROM_ABOVE = ("pairing.chi2", "fit.chi2")


def observables_of(live: LiveStudy) -> list[Observable]:
    """Return the observables of the table shown; all known ones before there is one."""
    plan = live.shown_plan
    if plan is None:
        return list(OBSERVABLES)
    return [item for item in plan.observables if item.name in live.table]


def observable_in(plan: StudyPlan, name: str) -> Observable:
    """Return an observable with the range and label that it has under a plan."""
    return next(item for item in plan.observables if item.name == name)


def offer(choice: Any, live: LiveStudy, *first: tuple[str, str]) -> None:
    """Let a dropdown offer the observables of the table, keeping its value.

    Parameters
    ----------
    choice : Dropdown
        Its values are names of observables.
    live : LiveStudy
        The study.
    *first : tuple of str
        Label and value of entries before them.
    """
    options = [*first, *((item.axis_label, item.name) for item in observables_of(live))]
    if list(choice.options) != options:
        value = choice.value
        names = [name for _, name in options]
        choice.options = options
        choice.value = value if value in names else names[0]
