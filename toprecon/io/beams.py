"""From the coordinate system of a file to +z along the electron beam.

With a crossing angle both beams carry momentum towards +x; the boost that removes it
leaves them back to back along z. An electron beam along -z is turned around by a
rotation by 180 degrees about y, which keeps right-handed systems right-handed.
"""

from __future__ import annotations

import dataclasses
import math

import numpy as np

from toprecon.io.raw import FloatArray, RawEvents
from toprecon.kinematics import boost


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
    if events.truth is not None:
        for name, p in events.truth.p.items():
            events.truth.p[name] = frame.to_electron_frame(p)
