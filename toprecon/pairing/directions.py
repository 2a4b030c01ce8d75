"""How likely the reconstructed hemisphere is right, over all hypotheses together.

A wrong assignment that keeps the top in its hemisphere does not shift A_FB, one that
turns it does; so the hypotheses vote on the hemisphere, and one more stands for "none
of them is right", which knows nothing about it.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from toprecon.pairing.engine import Group
from toprecon.pairing.hypotheses import Hypotheses

FloatArray = NDArray[np.float64]

WIDTH = 0.03
"""Width in cos(theta) of the step at 90 degrees; 68 % of the right pairs of showered
events at 500 GeV lie within it of the generated top."""

NONE = 0.135
"""Weight of "none is right" beside likelihood ratios right/wrong. Slopes 1-a-b change by
less than their error between 0.05 and 0.4 (showered events, 500 GeV)."""

HIGHEST = 600.0  # keeps exp(chi2/2) finite


def forward_probability(
    group: Group, table: Hypotheses, sign: FloatArray, events: slice
) -> FloatArray:
    """Return how likely every lepton+jets hypothesis says that the top is forward.

    Parameters
    ----------
    group : Group
        Momenta.
    table : Hypotheses
        Those of the lepton+jets channel.
    sign : array, shape (E,)
        +1 where the hadronic side is the top, -1 where it is the antitop.
    events : slice
        Events wanted.

    Returns
    -------
    array, shape (P, events)
        Near 0 or 1 away from 90 degrees.
    """
    legs = []
    for b, row in table.hadronic_legs.tolist():
        i, j = table.w_pairs[row].tolist()
        p = group.jets[1:, [b, i, j], events].sum(axis=1)
        cosine = p[2] / np.sqrt((p * p).sum(axis=0))
        legs.append(1.0 / (1.0 + np.exp(-sign[events] * cosine / WIDTH)))
    result: FloatArray = np.stack(legs)[table.rows[:, 0]]
    return result


def direction_share(
    forward: FloatArray, chi2: FloatArray, best: NDArray[np.int64]
) -> FloatArray:
    """Return the probability that the hemisphere of the best hypothesis is right.

    Parameters
    ----------
    forward : array, shape (P, E)
        From :func:`forward_probability`.
    chi2 : array, shape (P, E)
        -2 ln of the likelihood ratios right/wrong; infinite if masked.
    best : array of int, shape (E,)
        Chosen hypothesis.

    Returns
    -------
    array, shape (E,)
        One half where nothing is known; NaN where every hypothesis is masked.
    """
    lowest = chi2.min(axis=0)
    found = np.isfinite(lowest)
    weights = np.exp(-0.5 * (chi2 - np.where(found, lowest, 0.0)))
    none = NONE * np.exp(0.5 * np.clip(lowest, -HIGHEST, HIGHEST))
    total = weights.sum(axis=0) + none
    share = ((weights * forward).sum(axis=0) + 0.5 * none) / total
    chosen = np.take_along_axis(forward, best[None], axis=0)[0]
    return np.where(found, np.where(chosen >= 0.5, share, 1.0 - share), np.nan)
