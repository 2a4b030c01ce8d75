"""The ways of sharing jets between two tops, as tables.

A hypothesis is two *legs*. A hadronic leg is a b jet and a pair of W jets; a leptonic
leg is a b jet beside the lepton and the neutrino. Legs are shared by hypotheses (six
jets: 60 legs for 90 hypotheses), so they are evaluated once.
"""

from __future__ import annotations

import dataclasses
from functools import cache
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from toprecon.events import Channel

IntArray = NDArray[np.int64]

FEWEST_JETS = {Channel.LEPTON_JETS: 4, Channel.ALL_HADRONIC: 6}


@dataclasses.dataclass(frozen=True, eq=False)
class Hypotheses:
    """All assignments of n jets in a channel.

    Parameters
    ----------
    w_pairs : array of int, shape (W, 2)
        Pairs of jets, first below second.
    hadronic_legs : array of int, shape (A, 2)
        Jet of the b, row of ``w_pairs``.
    leptonic_legs : array of int, shape (B,)
        Jet of the b; empty in the all-hadronic channel.
    rows : array of int, shape (P, 2)
        Row of the first hadronic leg, and of the second hadronic or the leptonic one.
    assignments : array of int8, shape (P, 6)
        Jets b, q, q of the first and second side; -1 where the side is leptonic.
    """

    n_jets: int
    w_pairs: IntArray
    hadronic_legs: IntArray
    leptonic_legs: IntArray
    rows: IntArray
    assignments: NDArray[np.int8]

    def __len__(self) -> int:
        return len(self.rows)

    @property
    def is_leptonic(self) -> bool:
        """Whether the second side is leptonic."""
        return len(self.leptonic_legs) > 0


@cache
def hypotheses(channel: Channel, n_jets: int) -> Hypotheses:
    """Return the assignments of n jets: 12 for four jets, 90 for six all-hadronic.

    Parameters
    ----------
    channel : Channel
        Lepton+jets uses four of the jets, all-hadronic six; with more jets every
        subset is there.
    n_jets : int
        Number of jets.

    Returns
    -------
    Hypotheses
        Tables; neither the order of the W jets nor, all-hadronic, that of the two
        sides is counted twice.
    """
    jets = range(n_jets)
    w_pairs = list(combinations(jets, 2))
    legs = [(b, w) for w, pair in enumerate(w_pairs) for b in jets if b not in pair]
    rows, assignments = [], []
    for first, (b, w) in enumerate(legs):
        used = {b, *w_pairs[w]}
        if channel is Channel.LEPTON_JETS:
            for b_leptonic in jets:
                if b_leptonic not in used:
                    rows.append((first, b_leptonic))
                    assignments.append((b, *w_pairs[w], b_leptonic, -1, -1))
            continue
        for second, (b_other, w_other) in enumerate(legs[first + 1 :], first + 1):
            if used.isdisjoint({b_other, *w_pairs[w_other]}):
                rows.append((first, second))
                assignments.append((b, *w_pairs[w], b_other, *w_pairs[w_other]))
    leptonic = list(jets) if channel is Channel.LEPTON_JETS else []
    return Hypotheses(
        n_jets=n_jets,
        w_pairs=np.array(w_pairs, dtype=np.int64).reshape(-1, 2),
        hadronic_legs=np.array(legs, dtype=np.int64).reshape(-1, 2),
        leptonic_legs=np.array(leptonic, dtype=np.int64),
        rows=np.array(rows, dtype=np.int64).reshape(-1, 2),
        assignments=np.array(assignments, dtype=np.int8).reshape(-1, 6),
    )
