"""Mixing of 64-bit words: identities become uniform random numbers.

Integers only, so that any machine and any chunking gives the same result.
"""

from __future__ import annotations

import hashlib
from typing import Any

import numpy as np
from numpy.typing import NDArray


def mix64(values: Any) -> NDArray[np.uint64]:
    """Return the words after the finaliser of splitmix64.

    Parameters
    ----------
    values : array of uint64, any shape
        Words; other integers are taken modulo 2^64.

    Returns
    -------
    array of uint64, same shape
        A permutation of the 64-bit words; 0 stays 0.

    References
    ----------
    G. L. Steele, D. Lea, C. H. Flood, OOPSLA 2014, p. 453, doi:10.1145/2660193.2660195
    (algorithm); the constants are those of the variant known as Mix13.
    """
    z = np.array(values, dtype=np.uint64, copy=True)
    z ^= z >> np.uint64(30)
    z *= np.uint64(0xBF58476D1CE4E5B9)
    z ^= z >> np.uint64(27)
    z *= np.uint64(0x94D049BB133111EB)
    z ^= z >> np.uint64(31)
    return z


def hash_text(text: str) -> int:
    """Return the first 64 bits of the SHA-256 of a text, as an unsigned integer."""
    return int.from_bytes(hashlib.sha256(text.encode()).digest()[:8], "little")
