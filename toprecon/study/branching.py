"""Paired jets or fat jets: both branches on the same events, energy by energy."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Mapping
from typing import Any

import numpy as np

from toprecon.errors import StudyError
from toprecon.events import Channel, EventTable
from toprecon.statistics import Measured, weighted_share
from toprecon.study.plan import BranchChoice, StudyPlan
from toprecon.study.reading import event_chunks, opened
from toprecon.study.reconstruction import reconstruct
from toprecon.study.result import finish
from toprecon.study.sums import summarise

CHUNK = 20_000
"""Events with particles read at a time."""

_QUANTITIES = (
    "efficiency",
    "generated",
    "generated_selected",
    "reconstructed",
    "shift",
    "acceptance_shift",
    "possible",
    "fraction_right",
    "slope",
)


@dataclasses.dataclass(frozen=True)
class BranchRow:
    """One branch on the signal events of one sample.

    Parameters
    ----------
    branch : str
        Name of the plan, such as ``resolved``.
    sample : str
        Name of the sample.
    sqrt_s : float
        Collision energy [GeV].
    helicity : str
        Of the beams.
    events : int
        Entries of the sample.
    efficiency : Measured
        Selected over all signal in the truth phase space.
    generated, generated_selected, reconstructed : Measured
        A_FB of the signal: generated angle of all and of the selected events,
        reconstructed angle of the selected ones.
    shift, acceptance_shift : Measured
        Reconstructed minus generated of the same events (paired error); selected minus
        all, generated angle.
    possible : Measured
        Signal events in which the branch can be right, over all signal before any
        selection. Resolved: every quark has a jet of its own. Boosted: all quarks of
        the hadronic tops are inside their fat jets. Both need the lepton of their
        channel.
    fraction_right : Measured
        Selected events. Resolved: right pairings over matched events. Boosted: all
        quarks inside over all events.
    slope : Measured
        1 - a - b of the flips of the hemisphere.
    """

    branch: str
    sample: str
    sqrt_s: float
    helicity: str
    events: int
    efficiency: Measured
    generated: Measured
    generated_selected: Measured
    reconstructed: Measured
    shift: Measured
    acceptance_shift: Measured
    possible: Measured
    fraction_right: Measured
    slope: Measured


@dataclasses.dataclass(frozen=True)
class BranchComparison:
    """Branches on the same events.

    Parameters
    ----------
    rows : tuple of BranchRow
        By energy, sample, then branch.
    plans : dict of StudyPlan
        What each branch was reconstructed with.
    """

    rows: tuple[BranchRow, ...]
    plans: dict[str, StudyPlan]

    def __getitem__(self, key: tuple[str, str]) -> BranchRow:
        """Return the row of (branch, sample)."""
        for row in self.rows:
            if (row.branch, row.sample) == key:
                return row
        raise KeyError(key)

    @property
    def samples(self) -> tuple[str, ...]:
        """Names of the samples, by energy."""
        return tuple(dict.fromkeys(row.sample for row in self.rows))

    def to_mapping(self) -> list[dict[str, Any]]:
        """Return the rows as plain data."""
        return [
            {
                **{n: getattr(row, n) for n in ("branch", "sample", "sqrt_s")},
                "helicity": row.helicity,
                "events": row.events,
                **{n: getattr(row, n).to_mapping() for n in _QUANTITIES},
            }
            for row in self.rows
        ]

    def __str__(self) -> str:
        width = max(18, *(len(row.sample) for row in self.rows))
        shares = {"possible": "possible", "efficiency": "selected"}
        shares["fraction_right"] = "right"
        values = {
            "acceptance_shift": "selected - all",
            "generated_selected": "generated",
            "shift": "reco. - gen.",
        }
        lines = [
            f"{'sample':{width}} {'branch':9}"
            + "".join(f"{title:>10}" for title in shares.values())
            + "".join(f"{title:>19}" for title in values.values())
        ]
        lines += [
            f"{r.sample:{width}} {r.branch:9}"
            + "".join(f"{100 * getattr(r, name).value:8.1f} %" for name in shares)
            + "".join(f"{getattr(r, name)!s:>19}" for name in values)
            for r in self.rows
        ]
        lines += [
            "possible, selected: of all signal; right: of the selected (and possible)",
            "possible: resolved, a jet for every quark; boosted, all quarks in fat jets",
            "selected - all: generated A_FB; generated: A_FB of the selected",
        ]
        return "\n".join(lines)


def branch_plan(plan: StudyPlan, branch: str) -> StudyPlan:
    """Return a plan for one branch, with the cuts that have a meaning in it.

    Parameters
    ----------
    plan : StudyPlan
        Any plan.
    branch : str
        ``"resolved"`` or ``"boosted"``.

    Returns
    -------
    StudyPlan
        Resolved: cuts on fat jets are dropped. Boosted: cuts on the pairing and the
        fit, and what the selection asks of single jets, are dropped; where no cut on a
        fat jet is on, every hadronic top must be tagged.
    """
    choice = BranchChoice(branch)
    plan = plan.with_settings({"study.branch": choice.value})
    if choice is BranchChoice.RESOLVED:
        return plan.without_cuts_on("boosted.")
    plan = plan.with_settings(
        {
            "selection.min_jets": 0,
            "selection.btag_high": 0.0,
            "selection.btag_low": 0.0,
        }
    ).without_cuts_on("pairing.", "fit.")
    if any(cut.observable.startswith("boosted.") for cut in plan.active_cuts):
        return plan
    tagged = 2 if plan.study.channel is Channel.ALL_HADRONIC else 1
    return plan.with_cut("boosted.n_tagged", low=tagged)


def compare_branches(
    source: Any,
    plan: StudyPlan,
    *,
    plans: Mapping[str, StudyPlan] | None = None,
    layout: Any = None,
    catalogue: Any = None,
    progress: Callable[[int, int], Any] | None = None,
) -> BranchComparison:
    """Reconstruct the same events by paired jets and by fat jets.

    Parameters
    ----------
    source : EventSource, events, path or list of paths
        Top pairs with truth and particles, of one or several energies.
    plan : StudyPlan
        What both branches share, see :func:`branch_plan`.
    plans : mapping of StudyPlan, optional
        Plans by name, instead of ``resolved`` and ``boosted`` made from ``plan``.
    layout, catalogue : optional
        How to read files, see :func:`toprecon.open_events`.
    progress : callable, optional
        Called with (chunks done, chunks in all).

    Returns
    -------
    BranchComparison
        One row per sample and branch; samples without signal are left out.

    Raises
    ------
    StudyError
        If there is no top-pair sample.
    """
    source = opened(source, layout=layout, catalogue=catalogue)
    both = ("resolved", "boosted")
    used = dict(plans) if plans else {n: branch_plan(plan, n) for n in both}
    parts: dict[str, list[EventTable]] = {name: [] for name in used}
    n_chunks, chunks = event_chunks(source, CHUNK)
    done = 0
    for events in chunks:
        for name, one in used.items():
            parts[name].append(reconstruct(events, one))
            done += 1
            if progress is not None:
                progress(done, n_chunks * len(used))
    rows = []
    for name, one in used.items():
        rows += [
            _row(name, part, one)
            for part in _by_sample(EventTable.concatenate(parts[name]))
            if part.samples[0].is_signal_process and len(part)
        ]
    if not rows:
        msg = "branches: at least one sample of top pairs is required; got none"
        raise StudyError(msg)
    order = {sample: k for k, sample in enumerate(r.sample for r in rows)}
    rows.sort(key=lambda r: (r.sqrt_s, order[r.sample]))
    return BranchComparison(tuple(rows), used)


def _by_sample(table: EventTable) -> list[EventTable]:
    """Return a table with all its observables for every sample."""
    parts = []
    for number, sample in enumerate(table.samples):
        part = table.take(np.flatnonzero(table["sample"] == number))
        columns = {**part.columns, "sample": np.zeros(len(part), dtype=np.int16)}
        parts.append(dataclasses.replace(part, columns=columns, samples=(sample,)))
    return parts


def _row(name: str, table: EventTable, plan: StudyPlan) -> BranchRow:
    """Study one sample."""
    (sample,) = table.samples
    a = finish(summarise(table, plan), plan).asymmetry
    return BranchRow(
        branch=name,
        sample=sample.name,
        sqrt_s=float(sample.sqrt_s),
        helicity=sample.helicity.name,
        events=len(table),
        efficiency=a.efficiency,
        generated=a.generated,
        generated_selected=a.generated_selected,
        reconstructed=a.reconstructed_signal,
        shift=a.shift,
        acceptance_shift=a.acceptance_shift,
        possible=_possible(table),
        fraction_right=a.fraction_right,
        slope=a.flips.slope,
    )


def _possible(table: EventTable) -> Measured:
    """Share of the signal with an angle that is right by the truth."""
    signal = table["is_signal"]
    # closest: the angle of the true assignment, or of a fat jet that holds its quarks
    can = np.isfinite(table["cos_theta_closest"][signal])
    return weighted_share(table["weight"][signal], can)
