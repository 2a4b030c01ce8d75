"""Particles of many events before a detector sees them."""

from __future__ import annotations

import dataclasses
from enum import IntEnum
from typing import Any

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]


class ParticleKind(IntEnum):
    """What a detector takes a particle for: values of ``particles.kind``."""

    CHARGED_HADRON = 0
    PHOTON = 1
    NEUTRAL_HADRON = 2
    ELECTRON = 3
    MUON = 4


@dataclasses.dataclass(frozen=True)
class Particles:
    """Final particles, and the heavy hadrons they come from.

    Parameters
    ----------
    p4 : array, shape (4, N)
        Momenta, event after event [GeV].
    pdg : array of int, shape (N,)
        Codes; neutrinos and the photons along the beams are included.
    counts : array of int, shape (E,)
        Particles per event.
    heavy_p4 : array, shape (4, H)
        Momenta of the hadrons with b or c quarks that decay weakly.
    heavy_pdg : array of int, shape (H,)
        Their codes.
    heavy_counts : array of int, shape (E,)
        Such hadrons per event.
    """

    p4: FloatArray
    pdg: IntArray
    counts: IntArray
    heavy_p4: FloatArray
    heavy_pdg: IntArray
    heavy_counts: IntArray

    @property
    def event(self) -> IntArray:
        """Event of every particle, shape (N,)."""
        return np.repeat(np.arange(len(self.counts)), self.counts)

    @property
    def heavy_event(self) -> IntArray:
        """Event of every heavy hadron, shape (H,)."""
        return np.repeat(np.arange(len(self.heavy_counts)), self.heavy_counts)


def position_in_event(counts: Any) -> IntArray:
    """Return 0, 1, 2 ... within every event, shape (N,)."""
    counts = np.asarray(counts, dtype=np.int64)
    starts = np.cumsum(counts) - counts
    return np.arange(counts.sum()) - np.repeat(starts, counts)
