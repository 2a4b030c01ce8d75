"""Jets of measured particles, with tags and charges."""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import NDArray

from toprecon.generation.counters import Purpose, normals
from toprecon.generation.detector import Measured
from toprecon.generation.detector_options import DetectorOptions
from toprecon.generation.heavyflavour import quark_codes
from toprecon.generation.particles import Particles, position_in_event
from toprecon.generation.response_options import ResponseOptions
from toprecon.generation.tags import btag_score, charge_measurement, electric_charge
from toprecon.jets import cluster_durham, jet_charge
from toprecon.kinematics import angle

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
LIGHT = 1  # code that stands for a jet without heavy hadrons


@dataclasses.dataclass(frozen=True)
class FoundJets:
    """Jets and their particles, flat arrays, event after event.

    ``flavour`` is the code of the heavy quark in the jet (with its sign), or 1.
    """

    p4: FloatArray
    counts: IntArray
    btag: FloatArray
    track_charge: FloatArray
    vertex_charge: FloatArray
    flavour: IntArray
    particle_p4: FloatArray
    jet_index: IntArray


def find_jets(
    measured: Measured,
    truth: Particles,
    ids: NDArray[np.uint64],
    n_jets: int,
    options: DetectorOptions,
    response: ResponseOptions,
) -> FoundJets:
    """Cluster particles into a fixed number of jets and tag them.

    Parameters
    ----------
    measured : Measured
        Particles without the isolated leptons.
    truth : Particles
        Gives the heavy hadrons.
    ids : array of uint64, shape (E,)
        Identities of the events.
    n_jets : int
        Jets per event; an event with fewer particles has none.
    options : DetectorOptions
        Confusion of showers, power of the track charge.
    response : ResponseOptions
        Tag rates and purity of the vertex charge.

    Returns
    -------
    FoundJets
        Jets by decreasing energy.
    """
    first = cluster_durham(measured.p4, measured.counts, n_jets)
    jet_event = np.repeat(np.arange(len(first.counts)), first.counts)
    place = position_in_event(first.counts)
    spread = normals(ids[jet_event], place, Purpose.JET_ENERGY)
    scale = np.maximum(1 + options.jet_confusion * spread, 0.1)
    # the jet and its particles are scaled together: the jet stays their sum
    starts = np.cumsum(first.counts) - first.counts
    inside = first.jet_index >= 0
    global_index = np.where(inside, starts[measured.event] + first.jet_index, 0)
    factor = np.ones(len(inside))
    factor[inside] = scale[global_index[inside]]
    particle_p4 = measured.p4 * factor
    # summed here in the order of the particles: the same bits in any company
    p4: FloatArray = np.stack(
        [
            np.bincount(global_index[inside], weights=c[inside], minlength=len(scale))
            for c in particle_p4
        ]
    )
    order = np.lexsort((-p4[0], jet_event))
    rank = np.empty(len(order), dtype=np.int64)
    rank[order] = np.arange(len(order))
    jet_index = np.full(len(inside), -1, dtype=np.int64)
    jet_index[inside] = (rank[global_index] - starts[measured.event])[inside]
    p4 = p4[:, order]
    flavour = jet_flavour(p4, first.counts, truth)
    tag_ids = ids[jet_event]
    vertex = np.where(np.abs(flavour) == 5, electric_charge(flavour), 0.0)
    return FoundJets(
        p4=p4,
        counts=first.counts,
        btag=btag_score(normals(tag_ids, place, Purpose.BTAG), flavour, response),
        track_charge=jet_charge(
            measured.charge,
            particle_p4,
            jet_index,
            options.track_charge_power,
            counts=measured.counts,
            jet_counts=first.counts,
        ),
        vertex_charge=charge_measurement(
            normals(tag_ids, place, Purpose.VERTEX_CHARGE),
            vertex,
            response.vertex_charge_purity,
            width=1.0,
        ),
        flavour=flavour,
        particle_p4=particle_p4,
        jet_index=jet_index,
    )


def jet_flavour(p4: FloatArray, counts: IntArray, truth: Particles) -> IntArray:
    """Return the heavy quark of every jet.

    Parameters
    ----------
    p4 : array, shape (4, J)
        Jets, event after event.
    counts : array of int, shape (E,)
        Jets per event.
    truth : Particles
        Gives the hadrons with b or c quarks that decay weakly.

    Returns
    -------
    array of int, shape (J,)
        A hadron belongs to the jet nearest in angle; b goes before c, then the hadron
        of higher energy counts. Jets without one have the code 1.
    """
    flavour = np.full(p4.shape[1], LIGHT, dtype=np.int64)
    event = truth.heavy_event
    sizes = counts[event]
    starts = (np.cumsum(counts) - counts)[event]
    hadron = np.repeat(np.arange(len(event)), sizes)
    jet = np.repeat(starts, sizes) + position_in_event(sizes)
    opening = angle(p4[:, jet], truth.heavy_p4[:, hadron])
    # nearest jet of every hadron: first of each group after sorting by angle
    order = np.lexsort((opening, hadron))
    _, first = np.unique(hadron[order], return_index=True)
    nearest, owner = jet[order][first], hadron[order][first]
    codes = quark_codes(truth.heavy_pdg[owner])
    importance = truth.heavy_p4[0, owner] + 1e6 * (np.abs(codes) == 5)
    order = np.argsort(importance, kind="stable")
    flavour[nearest[order]] = codes[order]  # the most important is written last
    return flavour
