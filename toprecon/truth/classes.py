"""How a chosen assignment compares with the one of the generated quarks."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from toprecon.events import Channel, PairingClass


def classify(
    assignment: ArrayLike,
    closest: ArrayLike,
    *,
    has_truth: ArrayLike,
    is_signal_process: ArrayLike,
    matched: ArrayLike,
    channel: Channel = Channel.LEPTON_JETS,
) -> NDArray[np.uint8]:
    """Return the pairing class of every event.

    Parameters
    ----------
    assignment, closest : array of int, shape (E, 6)
        Chosen assignment, and that of the generated quarks.
    has_truth, is_signal_process, matched : array of bool, shape (E,)
        Whether the generated pair is known, the sample is top-pair production, and
        every quark has its jet.
    channel : Channel
        Both sides are compared by their jets in either channel.

    Returns
    -------
    array of uint8, shape (E,)
        Values of :class:`~toprecon.events.PairingClass`. Sets are compared, so neither
        the order of two W jets nor which side is called the top matters. ``b_swapped``
        has the W jets right and the b jets not; ``w_mixed`` is the rest. An event
        without a chosen assignment is ``unmatched``.
    """
    del channel  # the -1 of a leptonic side are part of the sets compared
    chosen, true = np.asarray(assignment), np.asarray(closest)
    chosen_w, true_w = _w_sides(chosen), _w_sides(true)
    straight = (chosen_w == true_w).all(axis=1)
    crossed = (chosen_w == true_w[:, ::-1]).all(axis=1)
    b, b_true = chosen[:, [0, 3]], true[:, [0, 3]]
    correct = (straight & (b == b_true).all(axis=1)) | (
        crossed & (b == b_true[:, ::-1]).all(axis=1)
    )
    result: Any = np.full(len(chosen), PairingClass.W_MIXED, dtype=np.uint8)
    result[straight | crossed] = PairingClass.B_SWAPPED
    result[correct] = PairingClass.CORRECT
    result[~np.asarray(matched) | (chosen < 0).all(axis=1)] = PairingClass.UNMATCHED
    result[~np.asarray(is_signal_process)] = PairingClass.NOT_SIGNAL
    result[~np.asarray(has_truth)] = PairingClass.NO_TRUTH
    return result


def _w_sides(assignment: NDArray[Any]) -> NDArray[np.int64]:
    """One number per W that does not depend on the order of its jets, shape (E, 2)."""
    pairs = assignment[:, [[1, 2], [4, 5]]].astype(np.int64)
    low, high = pairs.min(axis=2), pairs.max(axis=2)
    return low * 1000 + high
