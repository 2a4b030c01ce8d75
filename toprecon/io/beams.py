"""From the coordinate system of a file to +z along the electron beam.

With a crossing angle both beams carry momentum towards +x; the boost that removes it
leaves them back to back along z. An electron beam along -z is turned around by a
rotation by 180 degrees about y, which keeps right-handed systems right-handed.
"""

from __future__ import annotations

import dataclasses
import math

import numpy as np

from toprecon.io.generated import GeneratedParticles
from toprecon.io.raw import FloatArray, RawEvents
from toprecon.kinematics import boost, mass

_BEAM_ENERGY = 10.0  # GeV, below it an electron without parents is no beam particle


@dataclasses.dataclass(frozen=True)
class BeamFrame:
    """How the beams lie in a file.

    Parameters
    ----------
    flipped : bool
        Whether the electron beam goes along -z.
    crossing_angle : float
        Full crossing angle in the x-z plane [rad].
    """

    flipped: bool = False
    crossing_angle: float = 0.0

    def to_electron_frame(self, p: FloatArray) -> FloatArray:
        """Return momenta with +z along the electron beam and no crossing angle.

        Parameters
        ----------
        p : array, shape (4, ...)
            Momenta [GeV] in the system of the file.

        Returns
        -------
        array, shape (4, ...)
            Momenta [GeV]; NaN stays NaN.

        Notes
        -----
        Beams E (1, sin(a/2), 0, +-cos(a/2)) have no transverse momentum after a boost
        along x with the velocity -sin(a/2).
        """
        if self.crossing_angle:
            with np.errstate(all="ignore"):
                p = boost(p, (-math.sin(0.5 * self.crossing_angle), 0.0, 0.0))
        if self.flipped:
            p = np.stack([p[0], -p[1], p[2], -p[3]])
        return p


def to_electron_frame(events: RawEvents, frame: BeamFrame) -> None:
    """Turn all momenta of raw events, in place."""
    if frame == BeamFrame():
        return
    for objects in events.objects.values():
        objects.p = frame.to_electron_frame(objects.p)
    if events.missing is not None:
        events.missing = frame.to_electron_frame(events.missing)
    if events.visible is not None:
        events.visible = frame.to_electron_frame(events.visible)
    if events.truth is not None:
        for name, p in events.truth.p.items():
            events.truth.p[name] = frame.to_electron_frame(p)


def complete_missing(events: RawEvents) -> None:
    """Compute a missing momentum that is not stored, in place.

    It is the initial state, at rest with the nominal energy, less all particles; where
    the nominal energy is not known its energy is taken as its momentum.
    """
    if events.missing is not None or events.visible is None:
        return
    visible = events.visible
    size = np.sqrt(visible[1] ** 2 + visible[2] ** 2 + visible[3] ** 2)
    energy = events.headers.sqrt_s - visible[0]
    events.missing = np.stack(
        [np.where(np.isnan(energy), size, energy), *(-visible[1:])]
    )


def beam_particles(
    particles: GeneratedParticles,
) -> tuple[FloatArray, FloatArray] | None:
    """Return the momenta of electron and positron beam, of events that have both.

    Parameters
    ----------
    particles : GeneratedParticles
        Generated particles; the beams are the first electron and positron without
        parents and on opposite sides.

    Returns
    -------
    electron, positron : array, shape (4, n)
        E, px, py, pz [GeV]; None instead if no event has both.
    """
    has_parent = np.zeros(len(particles.pdg), dtype=bool)
    has_parent[particles.daughter] = True
    event = particles.event
    first = []
    for code in (11, -11):
        mask = (particles.pdg == code) & ~has_parent & (particles.p[0] > _BEAM_ENERGY)
        where = np.full(len(particles.counts), -1, dtype=np.int64)
        found = np.flatnonzero(mask)[::-1]
        where[event[found]] = found
        first.append(where)
    both = (first[0] >= 0) & (first[1] >= 0)
    electron, positron = (particles.p[:, where[both]] for where in first)
    # two leptons on the same side are decay products without links, no beams
    opposite = electron[3] * positron[3] < 0
    if not opposite.any():
        return None
    return electron[:, opposite], positron[:, opposite]


def frame_of(
    beams: tuple[FloatArray, FloatArray] | None,
) -> tuple[BeamFrame, float] | None:
    """Return how beams lie and their collision energy [GeV], as medians.

    Parameters
    ----------
    beams : arrays of shape (4, n), or None
        Electrons and positrons.

    Returns
    -------
    BeamFrame and float, or None
        None without beams.
    """
    if beams is None:
        return None
    electron, positron = beams
    total = electron + positron
    slope = float(np.median(total[1] / total[0]))
    # below 0.1 mrad it is the spread of the beams, not a crossing angle
    angle = 2 * math.asin(slope) if abs(slope) > 1e-4 else 0.0
    flipped = bool(np.median(electron[3]) < 0)
    return BeamFrame(flipped, angle), float(np.median(mass(total)))
