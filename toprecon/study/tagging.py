"""How good the tag of fat jets is, and a plan that uses the calibrated one."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable
from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.boosted import (
    Roc,
    TagLikelihood,
    TagRates,
    calibrate_tag,
    fat_jet_table,
    passes_tag,
    roc,
    tag_rates,
    tag_score,
)
from toprecon.errors import StudyError
from toprecon.events import Channel
from toprecon.resampling import in_half_a
from toprecon.study.branches import is_signal_process
from toprecon.study.plan import StudyPlan
from toprecon.study.reading import event_chunks, opened

FloatArray = NDArray[np.float64]
FatJets = dict[str, FloatArray]

CHUNK = 20_000
"""Events with particles read at a time."""

N_BINS = 8
"""Bins per observable of the likelihood ratio."""


@dataclasses.dataclass(frozen=True)
class TagQuality:
    """Efficiency and mistag rate of the cuts and of the likelihood ratio.

    Parameters
    ----------
    cuts : TagRates
        Of the cuts of the plan, on half B.
    curve : Roc
        Of the likelihood ratio calibrated on half A, on half B.
    likelihood : TagLikelihood
        Its tables.
    signal, background : int
        Fat jets of half B.
    plan : StudyPlan
        The plan with the likelihood ratio as tag, as efficient as the cuts.
    """

    cuts: TagRates
    curve: Roc
    likelihood: TagLikelihood
    signal: int
    background: int
    plan: StudyPlan

    def __str__(self) -> str:
        c = self.cuts
        mistag = self.curve.mistag_at(c.efficiency)
        return (
            f"tag on {self.signal} top and {self.background} other fat jets of half B: "
            f"cuts keep {c.efficiency:.3f} +- {c.efficiency_error:.3f} of the tops and "
            f"{c.mistag:.3f} +- {c.mistag_error:.3f} of the others; the likelihood ratio "
            f"at the same efficiency {mistag:.3f}"
        )


def tag_quality(
    source: Any,
    plan: StudyPlan,
    *,
    layout: Any = None,
    catalogue: Any = None,
    progress: Callable[[int, int], Any] | None = None,
) -> TagQuality:
    """Measure the tag of a plan, and calibrate a likelihood ratio beside it.

    Parameters
    ----------
    source : EventSource, events, path or list of paths
        Top pairs and other processes, with particles.
    plan : StudyPlan
        Its section ``[boosted]`` is used. Tops: the fat jets of the plan's channel.
        Others: both fat jets of every event of another process.
    layout, catalogue : optional
        How to read files, see :func:`toprecon.open_events`.
    progress : callable, optional
        Called with (chunks done, chunks in all).

    Returns
    -------
    TagQuality
        Rates are shares of all fat jets, whatever their energy.

    Raises
    ------
    StudyError
        If either kind of fat jets is missing.

    Notes
    -----
    The likelihood ratio is calibrated on half A of the events by identity; all rates
    are those of half B.
    """
    source = opened(source, layout=layout, catalogue=catalogue)
    n_chunks, chunks = event_chunks(source, CHUNK)
    parts: tuple[list[FatJets], list[FatJets]] = ([], [])
    for done, events in enumerate(chunks, 1):
        is_top = is_signal_process(events)
        channels = (plan.study.channel, Channel.ALL_HADRONIC)
        for found, keep, channel in zip(
            parts, (is_top, ~is_top), channels, strict=True
        ):
            if keep.any():
                found.append(_fat_jets(events[keep], plan, channel))
        if progress is not None:
            progress(done, n_chunks)
    tops, others = _joined(parts[0]), _joined(parts[1])
    for name, kind in (("top pairs", tops), ("another process", others)):
        if not kind or not len(kind["half_a"]):
            msg = (
                f"tag: fat jets of top pairs and of another process are required; got "
                f"none of {name}; give a background sample with particles as well"
            )
            raise StudyError(msg)
    fit = [_rows(kind, kind["half_a"] == 1) for kind in (tops, others)]
    use = [_rows(kind, kind["half_a"] == 0) for kind in (tops, others)]
    likelihood = calibrate_tag(fit[0], fit[1], n_bins=N_BINS)
    curve = roc(*(tag_score(kind, likelihood) for kind in use))
    rates = tag_rates(*(passes_tag(kind, plan.boosted.tag) for kind in use))
    threshold = float(np.interp(rates.efficiency, curve.efficiency, curve.threshold))
    tag = plan.boosted.tag.replace(
        method="likelihood",
        likelihood=likelihood,
        score_low=round(min(max(threshold, 0.0), 1.0), 4),
    )
    return TagQuality(
        cuts=rates,
        curve=curve,
        likelihood=likelihood,
        signal=len(use[0]["half_a"]),
        background=len(use[1]["half_a"]),
        plan=plan.replace(boosted=plan.boosted.replace(tag=tag)),
    )


def _fat_jets(events: ak.Array, plan: StudyPlan, channel: Channel) -> FatJets:
    """Return the substructure of fat jets, and the half that each belongs to."""
    table = fat_jet_table(events, plan.boosted, channel=channel)
    half_a = in_half_a(ak.to_numpy(events.id)).astype(np.float64)
    return {**table, "half_a": half_a[table["event"].astype(np.int64)]}


def _joined(parts: list[FatJets]) -> FatJets:
    """Join tables of chunks."""
    if not parts:
        return {}
    return {name: np.concatenate([part[name] for part in parts]) for name in parts[0]}


def _rows(table: FatJets, keep: NDArray[np.bool_]) -> FatJets:
    """Take rows of a table."""
    return {name: values[keep] for name, values in table.items()}
