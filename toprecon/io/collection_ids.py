"""Numbers of collections: the 32-bit MurmurHash3 of their names."""

from __future__ import annotations

_MASK = 0xFFFFFFFF


def collection_id(name: str) -> int:
    """Return the number that stands for a collection in relations.

    Parameters
    ----------
    name : str
        Name of the collection.

    Returns
    -------
    int
        32 bits, unsigned.

    References
    ----------
    A. Appleby, MurmurHash3 (public domain), variant x86 of 32 bits with seed 0.

    Examples
    --------
    >>> collection_id("MCParticles")
    2714477136
    """
    data = name.encode()
    h = 0
    whole = len(data) & ~3
    for i in range(0, whole, 4):
        h ^= _scramble(int.from_bytes(data[i : i + 4], "little"))
        h = (_rotated(h, 13) * 5 + 0xE6546B64) & _MASK
    h ^= _scramble(int.from_bytes(data[whole:], "little"))
    h ^= len(data)
    h = ((h ^ (h >> 16)) * 0x85EBCA6B) & _MASK
    h = ((h ^ (h >> 13)) * 0xC2B2AE35) & _MASK
    return h ^ (h >> 16)


def _rotated(x: int, n: int) -> int:
    """Rotate 32 bits to the left."""
    return ((x << n) | (x >> (32 - n))) & _MASK


def _scramble(k: int) -> int:
    """Mix one block."""
    return (_rotated((k * 0xCC9E2D51) & _MASK, 15) * 0x1B873593) & _MASK
