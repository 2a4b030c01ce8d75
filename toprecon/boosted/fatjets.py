"""Fat jets: the particles of every event in two jets."""

from __future__ import annotations

import dataclasses
import math

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.boosted.options import BoostedOptions, FatJetAlgorithm
from toprecon.errors import MissingFieldError
from toprecon.events import components, require_fields
from toprecon.jets import Jets, cluster_durham, cluster_generalised_kt

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

_THRUST_STEPS = 50
"""Steps after which the search for the thrust axis gives up; it needs about five."""


@dataclasses.dataclass(frozen=True)
class Particles:
    """Particles of E events as flat arrays.

    Parameters
    ----------
    p4 : array, shape (4, N)
        Momenta [GeV].
    counts : array of int, shape (E,)
        Particles per event; none for an event with a particle that is not finite.
    charge, kind, jet_index : array, shape (N,)
        As stored; -1 for an unknown kind or jet.
    is_finite : array of bool, shape (E,)
        Whether all particles of the event are finite.
    """

    p4: FloatArray
    counts: IntArray
    charge: FloatArray
    kind: IntArray
    jet_index: IntArray
    is_finite: NDArray[np.bool_]

    @property
    def event(self) -> IntArray:
        """Event of every particle, shape (N,)."""
        return np.repeat(np.arange(len(self.counts)), self.counts)


@dataclasses.dataclass(frozen=True)
class FatJets:
    """The two fat jets of every event, by decreasing energy.

    Parameters
    ----------
    p4 : array, shape (4, E, 2)
        Momenta before grooming [GeV]; NaN without two fat jets.
    found : array of bool, shape (E,)
        Whether there are two.
    fat_index : array of int, shape (N,)
        Fat jet 0 or 1 of every particle; -1 for none.
    """

    p4: FloatArray
    found: NDArray[np.bool_]
    fat_index: IntArray


def read_particles(events: ak.Array) -> Particles:
    """Return the particles of events as plain arrays.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events with ``particles``; the isolated lepton must not be among them.

    Returns
    -------
    Particles
        Flat arrays.

    Raises
    ------
    MissingFieldError
        If the events have no particles, or the particles no charge.
    """
    if "particles" not in events.fields:
        msg = (
            "events: field 'particles' is required by the boosted branch, but the "
            "events have none; map the particles of the file in its layout, or choose "
            "the resolved branch"
        )
        raise MissingFieldError(msg)
    particles = events.particles
    where = "events.particles"
    require_fields(particles, ("E", "px", "py", "pz", "charge"), where=where)
    counts = ak.to_numpy(ak.num(particles, axis=1)).astype(np.int64)
    flat = ak.flatten(particles, axis=1)
    p4 = components(flat)
    event = np.repeat(np.arange(len(counts)), counts)
    finite = np.ones(len(counts), dtype=bool)
    finite[event[~np.isfinite(p4).all(axis=0)]] = False
    keep = finite[event]
    unknown = np.full(len(event), -1, dtype=np.int64)

    def column(name: str) -> IntArray:
        if name not in flat.fields:
            return unknown[keep]
        return ak.to_numpy(flat[name]).astype(np.int64)[keep]

    return Particles(
        p4=p4[:, keep],
        counts=np.where(finite, counts, 0),
        charge=ak.to_numpy(flat.charge).astype(np.float64)[keep],
        kind=column("kind"),
        jet_index=column("jet_index"),
        is_finite=finite,
    )


def find_fat_jets(
    particles: Particles, sqrt_s: FloatArray, options: BoostedOptions
) -> FatJets:
    """Cluster the particles of every event into two fat jets.

    Parameters
    ----------
    particles : Particles
        Particles without the isolated lepton.
    sqrt_s : array, shape (E,)
        Collision energies [GeV], for a radius that scales with them.
    options : BoostedOptions
        Algorithm and its settings.

    Returns
    -------
    FatJets
        Two per event; an event that cannot give them has none.
    """
    p4, counts = particles.p4, particles.counts
    algorithm = options.algorithm
    if algorithm is FatJetAlgorithm.INCLUSIVE:
        radius = np.full(len(counts), options.radius)
        if options.reference_energy > 0:
            radius = np.minimum(radius * options.reference_energy / sqrt_s, math.pi)
        jets = cluster_generalised_kt(p4, counts, power=options.power, radius=radius)
    elif algorithm is FatJetAlgorithm.GENERALISED_KT:
        jets = cluster_generalised_kt(p4, counts, power=options.power, n_jets=2)
    else:
        jets = cluster_durham(p4, counts, 2)
        if algorithm is FatJetAlgorithm.HEMISPHERES:
            jets = thrust_hemispheres(p4, counts, jets)
    return _two_leading(jets, particles, options.least_energy)


def _two_leading(jets: Jets, particles: Particles, least_energy: float) -> FatJets:
    """Keep the two most energetic jets of every event."""
    first = np.cumsum(jets.counts) - jets.counts
    found = jets.counts >= 2
    p4 = np.full((4, len(jets.counts), 2), np.nan)
    for k in (0, 1):
        p4[:, found, k] = jets.p4[:, first[found] + k]
    with np.errstate(invalid="ignore"):
        found = found & (p4[0, :, 1] >= least_energy)
    p4[:, ~found] = np.nan
    usable = (jets.jet_index < 2) & found[particles.event]
    return FatJets(p4, found, np.where(usable, jets.jet_index, -1))


def thrust_hemispheres(p4: FloatArray, counts: IntArray, start: Jets) -> Jets:
    """Divide every event by the plane across its thrust axis.

    Starting from the axis of two jets, the axis becomes the sum of p_i sign(p_i . axis)
    until no particle changes sides. The thrust sum of |p_i . axis| grows in every step,
    so the end is a local maximum; for events of two jets it is the thrust axis.

    Parameters
    ----------
    p4 : array, shape (4, N)
        Momenta [GeV].
    counts : array of int, shape (E,)
        Particles per event.
    start : Jets
        Two jets per event, or none.

    Returns
    -------
    Jets
        The same events, with hemispheres in place of the jets.

    References
    ----------
    S. Brandt, Ch. Peyrou, R. Sosnowski, A. Wroblewski, Phys. Lett. 12 (1964) 57;
    E. Farhi, Phys. Rev. Lett. 39 (1977) 1587.
    """
    event = np.repeat(np.arange(len(counts)), counts)
    n = len(counts)
    side = np.where(start.jet_index == 0, 1.0, -1.0)
    used = start.jet_index >= 0
    for _ in range(_THRUST_STEPS):
        axis = np.stack([_sum(event, side * c, n) for c in p4[1:]])
        new = np.where(np.sum(axis[:, event] * p4[1:], axis=0) >= 0, 1.0, -1.0)
        if np.array_equal(new, side):
            break
        side = new
    sums = np.stack(
        [_sum(event, c * (side == s), n) for s in (1.0, -1.0) for c in p4]
    ).reshape(2, 4, n)
    second_leads = sums[1, 0] > sums[0, 0]
    order = np.where(second_leads, sums[::-1], sums)
    label = np.where((side > 0) ^ second_leads[event], 0, 1)
    enough = start.counts == 2
    hemispheres = np.moveaxis(order, 0, -1)[:, enough].reshape(4, -1)
    return Jets(hemispheres, start.counts, np.where(used, label, -1), start.scales)


def _sum(event: IntArray, values: FloatArray, n: int) -> FloatArray:
    """Sum over the particles of every event."""
    return np.bincount(event, weights=values, minlength=n).astype(np.float64)
