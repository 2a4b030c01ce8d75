"""Two plans on the same events."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from toprecon.asymmetry import Comparison, Rows, compare
from toprecon.errors import StudyError
from toprecon.events import EventTable
from toprecon.study.chunks import reconstruct_source
from toprecon.study.cutting import apply_cuts
from toprecon.study.plan import StudyPlan
from toprecon.study.reading import table_path
from toprecon.study.sums import check_plan
from toprecon.study.weights import weighted_rows


def compare_plans(
    source: Any,
    first: StudyPlan,
    second: StudyPlan,
    *,
    beams: str = "plan",
    layout: Any = None,
    catalogue: Any = None,
) -> Comparison:
    """Carry out two plans on the same events and compare them with paired errors.

    Parameters
    ----------
    source : EventSource, events, path, list of paths, EventTable or pair of tables
        Events are reconstructed with both plans; one table, or a saved one, serves two
        plans that differ in cuts or beams only; two tables were made with one plan each.
    first, second : StudyPlan
        The plans.
    beams : str
        ``"plan"`` (each its own), ``"LR"`` or ``"RL"``.
    layout, catalogue : optional
        How to read files, see :func:`toprecon.open_events`.

    Returns
    -------
    Comparison
        Differences are second minus first.

    Raises
    ------
    StudyError
        If one table is given for plans that reconstruct differently.
    """
    reading = {"layout": layout, "catalogue": catalogue}
    tables = _tables(source, first, second, reading)
    sides = []
    for table, plan in zip(tables, (first, second), strict=True):
        check_plan(table, plan)
        weight, _ = weighted_rows(table, plan.beams, beams)
        selected = apply_cuts(table, plan).selected & (weight != 0)
        sides.append(Rows(table, selected, weight))
    return compare(*sides)


def _tables(
    source: Any, first: StudyPlan, second: StudyPlan, reading: dict[str, Any]
) -> tuple[EventTable, EventTable]:
    """Return a table for each plan."""
    same = first.reconstruct_hash == second.reconstruct_hash
    saved = table_path(source)
    if saved is not None:
        source = EventTable.load(saved)
    if isinstance(source, EventTable):
        if not same:
            msg = (
                "comparison: the plans reconstruct differently, so a table for each is "
                "required; got one; give the events, or a pair of tables"
            )
            raise StudyError(msg)
        return source, source
    if isinstance(source, Sequence) and _are_tables(source):
        one, other = source
        return one, other
    table = reconstruct_source(source, first, **reading)
    if same:
        return table, table
    return table, reconstruct_source(source, second, **reading)


def _are_tables(source: Sequence[Any]) -> bool:
    """Whether these are tables, and not paths."""
    return len(source) > 0 and all(isinstance(one, EventTable) for one in source)
