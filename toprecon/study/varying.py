"""Variations: how A_FB shifts if the detector, a mass or the beams are different."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Iterator, Mapping
from typing import Any

from toprecon.asymmetry import Comparison
from toprecon.errors import InputError, OptionError
from toprecon.events import EventTable
from toprecon.selection import VariationOptions, vary
from toprecon.statistics import Measured
from toprecon.study.comparing import compare_plans
from toprecon.study.plan import StudyPlan
from toprecon.study.reading import event_chunks, opened, table_path
from toprecon.study.reconstruction import reconstruct

CHUNK = 20_000
"""Events reconstructed at a time, once per variation."""

QUANTITIES = ("efficiency", "generated_selected", "reconstructed", "shift")
"""Columns of the table."""

Variations = Mapping[str, VariationOptions | StudyPlan]


@dataclasses.dataclass(frozen=True)
class VariationShifts(Mapping[str, Comparison]):
    """What variations do, each compared with the nominal study event by event.

    Parameters
    ----------
    comparisons : dict of Comparison
        By name; differences are varied minus nominal, with paired errors.
    """

    comparisons: dict[str, Comparison]

    def __getitem__(self, name: str) -> Comparison:
        return self.comparisons[name]

    def __iter__(self) -> Iterator[str]:
        return iter(self.comparisons)

    def __len__(self) -> int:
        return len(self.comparisons)

    def to_mapping(self) -> dict[str, dict[str, dict[str, float | None]]]:
        """Return the differences as plain data, by variation and quantity."""
        return {
            name: {q: found[q].difference.to_mapping() for q in QUANTITIES}
            for name, found in self.comparisons.items()
        }

    def __str__(self) -> str:
        heads = ("efficiency", "A_FB gen. selected", "A_FB reconstructed", "shift")
        lines = [f"{'varied - nominal':24}" + "".join(f"{head:>22}" for head in heads)]
        lines += [
            f"{name:24}"
            + "".join(f"{_text(found[q].difference):>22}" for q in QUANTITIES)
            for name, found in self.comparisons.items()
        ]
        return "\n".join(lines)


def usual_variations(
    plan: StudyPlan, beams: str = "plan"
) -> dict[str, VariationOptions | StudyPlan]:
    """Return variations that a first look needs.

    Parameters
    ----------
    plan : StudyPlan
        The nominal plan.
    beams : str
        ``"plan"``, ``"LR"`` or ``"RL"``; pure beams have no polarisation to vary.

    Returns
    -------
    dict
        Jet and lepton energies, jet resolution, b-tag efficiency, the top mass assumed
        in the pairing, and, where the plan states a luminosity, the polarisation of the
        electron beam. Their sizes are round numbers, not anybody's uncertainties.
    """
    out: dict[str, VariationOptions | StudyPlan] = {
        "jet energy +1 %": VariationOptions(jet_energy_scale=1.01),
        "jet energy -1 %": VariationOptions(jet_energy_scale=0.99),
        "jet resolution 5 % worse": VariationOptions(jet_energy_smearing=0.05),
        "lepton energy +0.5 %": VariationOptions(lepton_energy_scale=1.005),
        "b tags lost 2 %": VariationOptions(btag_loss=0.02),
    }
    mass = plan.pairing.top_mass
    for sign, step in (("+", 1.0), ("-", -1.0)):
        changed = {"pairing.top_mass": mass + step, "fit.top_mass": mass + step}
        out[f"assumed m_t {sign}1 GeV"] = plan.with_settings(changed)
    if plan.beams.luminosity > 0 and beams == "plan":
        p = plan.beams.electron_polarisation
        moved = p - 0.01 if p > 0 else p + 0.01
        settings = {"beams.electron_polarisation": moved}
        out["|P(e-)| 0.01 smaller"] = plan.with_settings(settings)
    return out


def variation_shifts(
    source: Any,
    plan: StudyPlan,
    variations: Variations | None = None,
    *,
    beams: str = "plan",
    layout: Any = None,
    catalogue: Any = None,
    progress: Callable[[int, int], Any] | None = None,
) -> VariationShifts:
    """Compare varied studies with the nominal one, event by event.

    Parameters
    ----------
    source : EventSource, events, path or list of paths
        Events.
    plan : StudyPlan
        The nominal plan.
    variations : mapping, optional
        By name: a change of the input (:class:`VariationOptions`), or another plan,
        such as one with another assumed top mass or other polarisations;
        :func:`usual_variations` if absent.
    beams : str
        ``"plan"``, ``"LR"`` or ``"RL"``.
    layout, catalogue : optional
        How to read files, see :func:`toprecon.open_events`.
    progress : callable, optional
        Called with (reconstructions done, reconstructions in all).

    Returns
    -------
    VariationShifts
        A mapping by name; ``print`` shows a table.

    Raises
    ------
    OptionError
        If a variation is something else.
    InputError
        If there are no events, or only a table of what was reconstructed from them.

    Examples
    --------
    Energy scale and assumed mass in one table::

        shifts = variation_shifts(
            source,
            plan,
            {
                "jet energy +1 %": VariationOptions(jet_energy_scale=1.01),
                "top mass +1 GeV": plan.with_settings({"pairing.top_mass": 173.5}),
            },
        )
        print(shifts)
        print(shifts["jet energy +1 %"]["reconstructed"].difference)
    """
    check_variable(source)
    wanted = usual_variations(plan, beams) if variations is None else dict(variations)
    for name, variation in wanted.items():
        if not isinstance(variation, (VariationOptions, StudyPlan)):
            msg = (
                f"variations: {name!r} must be VariationOptions or a StudyPlan; got "
                f"{type(variation).__name__}"
            )
            raise OptionError(msg)
    again = [n for n, v in wanted.items() if _reconstructs(v, plan)]
    source = opened(source, layout=layout, catalogue=catalogue)
    n_chunks, chunks = event_chunks(source, CHUNK)
    total, done = n_chunks * (1 + len(again)), 0
    parts: dict[str, list[EventTable]] = {name: [] for name in ("", *again)}
    plans = [plan, *(v for v in wanted.values() if isinstance(v, StudyPlan))]
    cut_on = {cut.observable for one in plans for cut in one.cuts}
    for events in chunks:
        for name, tables in parts.items():
            variation = wanted.get(name, plan)
            if isinstance(variation, VariationOptions):
                table = reconstruct(vary(events, variation), plan)
            else:
                table = reconstruct(events, variation)
            tables.append(_slim(table, cut_on))
            done += 1
            if progress is not None:
                progress(done, total)
    if not parts[""]:
        msg = "variations: at least one event is required; got none"
        raise InputError(msg)
    whole = {name: EventTable.concatenate(tables) for name, tables in parts.items()}
    nominal = whole.pop("")
    found = {}
    for name, variation in wanted.items():
        other = variation if isinstance(variation, StudyPlan) else plan
        pair = (nominal, whole.get(name, nominal))
        found[name] = compare_plans(pair, plan, other, beams=beams)
    return VariationShifts(found)


def check_variable(source: Any) -> None:
    """Check that there are events to vary.

    Parameters
    ----------
    source : EventSource, events, path or list of paths
        What is to be varied.

    Raises
    ------
    InputError
        If it is a table of what was reconstructed, or the file of one.
    """
    saved = table_path(source)
    if saved is not None or isinstance(source, EventTable):
        what = saved or "variations"
        msg = (
            f"{what}: events are required for variations, which reconstruct them again; "
            "got an event table; give the files that it was made from"
        )
        raise InputError(msg)


def _slim(table: EventTable, cut_on: set[str]) -> EventTable:
    """Table without the observables that no cut looks at: one is kept per variation."""
    observables = set(table.observables) - cut_on
    columns = {n: c for n, c in table.columns.items() if n not in observables}
    return dataclasses.replace(table, columns=columns)


def _text(number: Measured) -> str:
    """Return a number as text; one that cannot change is 0 without an error."""
    return "0" if number.value == 0 == number.error else str(number)


def _reconstructs(variation: VariationOptions | StudyPlan, plan: StudyPlan) -> bool:
    """Whether a variation needs a table of its own."""
    if isinstance(variation, VariationOptions):
        return True
    return variation.reconstruct_hash != plan.reconstruct_hash
