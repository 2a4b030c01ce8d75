"""What a detector measures of particles, and which leptons it finds isolated."""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import NDArray

from toprecon.generation.counters import Purpose, normals, uniforms
from toprecon.generation.detector_options import DetectorOptions
from toprecon.generation.particles import ParticleKind, Particles, position_in_event
from toprecon.generation.response import tilt
from toprecon.generation.response_options import ResponseOptions
from toprecon.kinematics import angle, momentum, transverse_momentum

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
BoolArray = NDArray[np.bool_]
PION_MASS = 0.13957  # GeV, Review of Particle Physics
NEUTRINOS = (12, 14, 16)
NEUTRAL_HADRONS = (130, 310, 2112, 3122, 3322)
MASSES = {ParticleKind.ELECTRON: 0.000511, ParticleKind.MUON: 0.105658}


@dataclasses.dataclass(frozen=True)
class Measured:
    """Particles as measured.

    Parameters
    ----------
    p4 : array, shape (4, N)
        Momenta, event after event [GeV]; charged hadrons have the pion mass.
    charge : array, shape (N,)
        Measured charges.
    kind : array of int, shape (N,)
        A :class:`ParticleKind`.
    counts : array of int, shape (E,)
        Particles per event.
    """

    p4: FloatArray
    charge: FloatArray
    kind: IntArray
    counts: IntArray

    @property
    def event(self) -> IntArray:
        """Event of every particle, shape (N,)."""
        return np.repeat(np.arange(len(self.counts)), self.counts)

    def take(self, keep: BoolArray) -> Measured:
        """Return some of the particles."""
        counts = np.bincount(self.event[keep], minlength=len(self.counts))
        return Measured(self.p4[:, keep], self.charge[keep], self.kind[keep], counts)


@dataclasses.dataclass(frozen=True)
class Leptons:
    """Isolated leptons, flat arrays, event after event."""

    p4: FloatArray
    charge: FloatArray
    pdg: IntArray
    isolation: FloatArray
    counts: IntArray


def measure(
    particles: Particles,
    ids: NDArray[np.uint64],
    options: DetectorOptions,
    response: ResponseOptions,
) -> Measured:
    """Measure the visible particles.

    Parameters
    ----------
    particles : Particles
        What reaches the detector.
    ids : array of uint64, shape (E,)
        Identities of the events.
    options : DetectorOptions
        Resolutions and thresholds.
    response : ResponseOptions
        Lepton efficiency and charge flips.

    Returns
    -------
    Measured
        Particles found, in the order given.
    """
    flavour, p = np.abs(particles.pdg), particles.p4
    size = np.maximum(momentum(p), 1e-12)
    event, index = ids[particles.event], position_in_event(particles.counts)
    kind = true_kind(flavour)
    charged = kind >= ParticleKind.ELECTRON
    charged |= kind == ParticleKind.CHARGED_HADRON
    pt = transverse_momentum(p)
    seen = (np.abs(p[3]) < options.max_abs_cosine * size) & ~np.isin(flavour, NEUTRINOS)
    found = uniforms(event, index, Purpose.TRACK_EFFICIENCY) < options.track_efficiency
    seen &= np.where(
        charged,
        found & (pt > options.track_minimum_pt),
        p[0]
        > np.where(
            kind == ParticleKind.PHOTON,
            options.photon_threshold,
            options.neutral_threshold,
        ),
    )
    p, kind, pt, size = p[:, seen], kind[seen], pt[seen], size[seen]
    event, index, charged = event[seen], index[seen], charged[seen]
    kind = identified_kind(event, index, kind, options, response.lepton_efficiency)
    flip = uniforms(event, index, Purpose.CHARGE_FLIP) < response.lepton_charge_flip
    charge = np.where(charged, charge_sign(particles.pdg[seen]), 0.0)
    charge = np.where(flip & (kind >= ParticleKind.ELECTRON), -charge, charge)
    scale = 1 + relative_resolution(p[0], pt, size, kind, options) * normals(
        event, index, Purpose.ENERGY
    )
    spread = np.select(
        [kind == ParticleKind.PHOTON, kind == ParticleKind.NEUTRAL_HADRON],
        [options.photon_angle, options.neutral_angle],
        0.0,
    )
    moved = tilt(
        p,
        spread * normals(event, index, Purpose.FIRST_ANGLE),
        spread * normals(event, index, Purpose.SECOND_ANGLE),
    )
    counts = np.bincount(particles.event[seen], minlength=len(particles.counts))
    direction = moved[1:] / size
    # neutral particles: the measured energy is the momentum; no negative tail
    value = np.where(charged, size, p[0]) * np.maximum(scale, 0.05)
    mass = np.select(
        [kind == k for k in (*MASSES, ParticleKind.CHARGED_HADRON)],
        [*MASSES.values(), PION_MASS],
        0.0,
    )
    p4 = np.concatenate([np.hypot(value, mass)[None], value * direction])
    return Measured(p4, charge, kind, counts)


def true_kind(flavour: IntArray) -> IntArray:
    """Return the kind of particles by the absolute value of their code."""
    return np.select(
        [
            flavour == 11,
            flavour == 13,
            flavour == 22,
            np.isin(flavour, NEUTRAL_HADRONS),
        ],
        [
            ParticleKind.ELECTRON,
            ParticleKind.MUON,
            ParticleKind.PHOTON,
            ParticleKind.NEUTRAL_HADRON,
        ],
        ParticleKind.CHARGED_HADRON,
    )


def charge_sign(codes: IntArray) -> FloatArray:
    """Return the charge of charged final particles: leptons have the opposite sign."""
    lepton = np.abs(codes) < 20
    baryon_minus = np.isin(np.abs(codes), (3112, 3312, 3334))  # Sigma-, Xi-, Omega-
    return np.where(lepton | baryon_minus, -1.0, 1.0) * np.sign(codes)


def identified_kind(
    event: NDArray[np.uint64],
    index: IntArray,
    kind: IntArray,
    options: DetectorOptions,
    efficiency: float,
) -> IntArray:
    """Return what particles are taken for: lost and fake leptons."""
    u = uniforms(event, index, Purpose.IDENTIFICATION)
    lost = (kind >= ParticleKind.ELECTRON) & (u > efficiency)
    hadron = kind == ParticleKind.CHARGED_HADRON
    electron = hadron & (u < options.electron_fake)
    muon = hadron & ~electron & (u < options.electron_fake + options.muon_fake)
    kind = np.where(lost, ParticleKind.CHARGED_HADRON, kind)
    kind = np.where(electron, ParticleKind.ELECTRON, kind)
    return np.where(muon, ParticleKind.MUON, kind)


def relative_resolution(
    energy: FloatArray,
    pt: FloatArray,
    size: FloatArray,
    kind: IntArray,
    options: DetectorOptions,
) -> FloatArray:
    """Return the relative energy resolution of particles by kind, shape (N,)."""
    root = np.sqrt(np.maximum(energy, 1e-3))
    photon = np.hypot(options.photon_stochastic / root, options.photon_constant)
    neutral = np.hypot(options.neutral_stochastic / root, options.neutral_constant)
    sine = np.maximum(pt / size, 1e-3)
    track = np.hypot(options.track_resolution * pt, options.track_scattering / sine)
    return np.select(
        [kind == ParticleKind.PHOTON, kind == ParticleKind.NEUTRAL_HADRON],
        [photon, neutral],
        track,
    )


def isolated_leptons(
    measured: Measured, options: DetectorOptions
) -> tuple[Leptons, BoolArray]:
    """Find the isolated leptons.

    Parameters
    ----------
    measured : Measured
        Particles as measured.
    options : DetectorOptions
        Smallest energy, cone, limit, dressing.

    Returns
    -------
    tuple of (Leptons, array of bool)
        Leptons by decreasing energy within each event, with the photons around them;
        and which particles, shape (N,), went into them.
    """
    p, kind, event = measured.p4, measured.kind, measured.event
    candidate = np.flatnonzero(
        (kind >= ParticleKind.ELECTRON) & (p[0] > options.lepton_minimum_energy)
    )
    starts = np.cumsum(measured.counts) - measured.counts
    # every candidate with all particles of its event
    sizes = measured.counts[event[candidate]]
    row = np.repeat(np.arange(len(candidate)), sizes)
    other = np.repeat(starts[event[candidate]], sizes) + position_in_event(sizes)
    owner = candidate[row]
    opening = angle(p[:, other], p[:, owner])
    itself = other == owner
    dressing = (kind[other] == ParticleKind.PHOTON) & (opening < options.dressing_angle)
    cone = np.clip(
        options.isolation_scale / p[0][candidate],
        options.isolation_narrowest,
        options.isolation_widest,
    )
    around = (opening < cone[row]) & ~itself & ~dressing
    n = len(candidate)
    energy_around = np.bincount(row, weights=p[0][other] * around, minlength=n)
    isolation: FloatArray = energy_around / p[0][candidate]
    good = isolation < options.isolation_limit
    joined = (itself | dressing) & good[row]
    used = np.zeros(len(kind), dtype=bool)
    used[other[joined]] = True
    momenta: FloatArray = np.stack(
        [np.bincount(row, weights=c[other] * joined, minlength=n)[good] for c in p]
    )
    chosen = candidate[good]
    order = np.lexsort((-momenta[0], event[chosen]))
    chosen, momenta = chosen[order], momenta[:, order]
    code = np.where(kind[chosen] == ParticleKind.ELECTRON, 11, 13)
    charge = measured.charge[chosen]
    return (
        Leptons(
            momenta,
            charge,
            (-charge * code).astype(np.int64),
            isolation[good][order],
            np.bincount(event[chosen], minlength=len(measured.counts)),
        ),
        used,
    )
