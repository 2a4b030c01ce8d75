"""Showered events: shower, detector, isolated leptons, jets."""

from __future__ import annotations

import dataclasses
from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.events import TRUTH_MOMENTA, momenta, record_of
from toprecon.generation.detector import Leptons, isolated_leptons, measure
from toprecon.generation.jetmaking import FoundJets, find_jets
from toprecon.generation.options import GenerationOptions, Process
from toprecon.generation.particles import Particles
from toprecon.generation.partons import Partons
from toprecon.generation.shower import shower_pairs, simulate_background

BoolArray = NDArray[np.bool_]


@dataclasses.dataclass(frozen=True)
class ShoweredEvents:
    """Objects of showered events.

    Parameters
    ----------
    fields : dict of ak.Array
        ``jets``, ``leptons`` and, if asked for, ``particles``.
    keep : array of bool, shape (E,)
        Events that pass the loose preselection; all of them for the signal.
    """

    fields: dict[str, ak.Array]
    keep: BoolArray


def showered_pairs(
    partons: Partons, ids: NDArray[np.uint64], options: GenerationOptions
) -> ShoweredEvents:
    """Carry generated pairs through the whole chain.

    Parameters
    ----------
    partons : Partons
        Generated pairs.
    ids : array of uint64, shape (E,)
        Identities of the events.
    options : GenerationOptions
        Detector, number of jets.

    Returns
    -------
    ShoweredEvents
        All of them.
    """
    return _observe(shower_pairs(partons, ids, options), ids, options)


def background_events(
    ids: NDArray[np.uint64], options: GenerationOptions
) -> ShoweredEvents:
    """Simulate a background, one collision per identity.

    Parameters
    ----------
    ids : array of uint64, shape (E,)
        Identities of the collisions.
    options : GenerationOptions
        Process, detector, number of jets.

    Returns
    -------
    ShoweredEvents
        With the preselection of the options.
    """
    return _observe(simulate_background(ids, options), ids, options)


def _observe(
    particles: Particles, ids: NDArray[np.uint64], options: GenerationOptions
) -> ShoweredEvents:
    """Detector, leptons and jets."""
    measured = measure(particles, ids, options.detector, options.response)
    leptons, used = isolated_leptons(measured, options.detector)
    rest = measured.take(~used)
    jets = find_jets(
        rest, particles, ids, options.jets_per_event, options.detector, options.response
    )
    fields = {
        "jets": momenta(
            jets.p4,
            jets.counts,
            btag=jets.btag,
            track_charge=jets.track_charge,
            vertex_charge=jets.vertex_charge,
        ),
        "leptons": momenta(
            leptons.p4,
            leptons.counts,
            charge=leptons.charge,
            pdg=leptons.pdg,
            isolation=leptons.isolation,
        ),
    }
    if options.keep_particles:
        fields["particles"] = momenta(
            jets.particle_p4,
            rest.counts,
            charge=rest.charge.astype(np.int8),
            kind=rest.kind.astype(np.int8),
            jet_index=jets.jet_index.astype(np.int8),
        )
    return ShoweredEvents(fields, _preselected(jets, leptons, options))


def _preselected(
    jets: FoundJets, leptons: Leptons, options: GenerationOptions
) -> BoolArray:
    """Loose preselection of backgrounds: the objects of a channel are there."""
    if options.process is Process.TTBAR or not options.preselect:
        return np.ones(len(jets.counts), dtype=bool)
    has_jets = jets.counts == options.jets_per_event
    if options.jets_per_event >= 6:
        return has_jets & (leptons.counts == 0)
    return has_jets & (leptons.counts >= 1)


def missing_truth(n: int) -> ak.Array:
    """Return the truth record of events without a pair of tops.

    Parameters
    ----------
    n : int
        Events.

    Returns
    -------
    ak.Array, shape (n,)
        NaN in every component, codes 0.
    """
    nothing = np.full((4, n), np.nan)
    fields: dict[str, Any] = {
        name: momenta(
            nothing,
            **({"pdg": np.zeros(n, dtype=np.int64)} if name.startswith("w_") else {}),
        )
        if name.endswith(("up", "down"))
        else momenta(nothing)
        for name in TRUTH_MOMENTA
    }
    for name in ("sqrt_s_prime", "electron_loss", "positron_loss"):
        fields[name] = np.full(n, np.nan)
    return record_of(fields)
