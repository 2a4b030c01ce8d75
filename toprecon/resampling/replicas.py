"""Poisson replicas and halves of a sample, from the identities of the events.

Replica r: h = mix64(id XOR mix64(seed + r)); the count is the number of fixed
thresholds of the Poisson(1) distribution that do not exceed h. Only integers are
compared, so every machine and every chunking gives the same replicas.
"""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.resampling.mixing import hash_text, mix64

_MASK = (1 << 64) - 1
HALF_SALT = hash_text("toprecon half")
"""Salt of the halves; replicas use their seed, so the two are independent."""


def _thresholds() -> NDArray[np.uint64]:
    """floor(2^64 P(N <= k)) for the Poisson distribution of mean 1, below 2^64."""
    e = sum(Fraction(1, _factorial(i)) for i in range(60))  # exact to far below 2^-64
    out, cumulative = [], Fraction(0)
    for k in range(30):
        cumulative += Fraction(1, _factorial(k)) / e
        word = int(cumulative * 2**64)
        if word >= _MASK:
            break
        out.append(word)
    return np.array(out, dtype=np.uint64)


def _factorial(n: int) -> int:
    """Return n! for small n."""
    return 1 if n < 2 else n * _factorial(n - 1)


THRESHOLDS = _thresholds()
"""Words at which the count of a replica increases by one."""


def replica_counts(ids: Any, seed: int, n: int) -> NDArray[np.uint8]:
    """Return how often every event occurs in each replica.

    Parameters
    ----------
    ids : array of uint64, shape (E,)
        Identities.
    seed : int
        Seed of the set of replicas; equal seeds correlate different observables.
    n : int
        Replicas.

    Returns
    -------
    array of uint8, shape (n, E)
        Poisson(1) counts.
    """
    words = np.asarray(ids, dtype=np.uint64)
    out = np.empty((n, len(words)), dtype=np.uint8)
    for replica in range(n):
        salt = mix64((seed + replica) & _MASK)
        h = mix64(words ^ salt)
        out[replica] = np.searchsorted(THRESHOLDS, h, side="right")
    return out


def in_half_a(ids: Any, *, salt: int = HALF_SALT) -> NDArray[np.bool_]:
    """Return which events belong to half A.

    Parameters
    ----------
    ids : array of uint64, shape (E,)
        Identities.
    salt : int
        Another salt gives another, independent division.

    Returns
    -------
    array of bool, shape (E,)
        True for about half of the events; half B is the rest.
    """
    words = np.asarray(ids, dtype=np.uint64)
    h = mix64(words ^ mix64(salt & _MASK))
    return (h >> np.uint64(63)).astype(bool)
