"""Random numbers addressed by event, object and purpose.

A number depends on these three only, so it does not matter in which order or company
events are simulated.
"""

from __future__ import annotations

from enum import IntEnum
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.resampling import mix64

FloatArray = NDArray[np.float64]
_EVENT_STEP = np.uint64(0x9E3779B97F4A7C15)  # odd constants spread the counters
_OBJECT_STEP = np.uint64(0xD1B54A32D192ED03)


class Purpose(IntEnum):
    """What a random number decides; each gives an independent one per object."""

    SHOWER_SEED = 1
    TRACK_EFFICIENCY = 2
    ENERGY = 3
    FIRST_ANGLE = 4
    SECOND_ANGLE = 5
    IDENTIFICATION = 6
    CHARGE_FLIP = 7
    JET_ENERGY = 8
    BTAG = 9
    VERTEX_CHARGE = 10


def words(ids: Any, index: Any, purpose: Purpose) -> NDArray[np.uint64]:
    """Return 64 random bits per object.

    Parameters
    ----------
    ids : array of uint64, shape (N,)
        Identity of the event of every object.
    index : array of int, shape (N,)
        Number of the object within its event.
    purpose : Purpose
        What the number is for.

    Returns
    -------
    array of uint64, shape (N,)
        Uniform.
    """
    with np.errstate(over="ignore"):
        event = mix64(
            np.asarray(ids, dtype=np.uint64) + np.uint64(purpose) * _EVENT_STEP
        )
        return mix64(
            event + (np.asarray(index).astype(np.uint64) + np.uint64(1)) * _OBJECT_STEP
        )


def uniforms(ids: Any, index: Any, purpose: Purpose) -> FloatArray:
    """Return uniform numbers in (0, 1), ends excluded, shape (N,)."""
    bits = (words(ids, index, purpose) >> np.uint64(11)).astype(np.float64)
    return (bits + 0.5) * 2.0**-53


def normals(ids: Any, index: Any, purpose: Purpose) -> FloatArray:
    """Return standard normal numbers, shape (N,)."""
    from scipy.special import ndtri

    return ndtri(uniforms(ids, index, purpose))
