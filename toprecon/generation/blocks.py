"""Random numbers that do not depend on how a sample is cut into chunks.

Event k of a sample belongs to block k // size, and a block is always generated as a
whole from its own stream of random numbers.
"""

from __future__ import annotations

from collections.abc import Iterator
from enum import IntEnum
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import OptionError
from toprecon.resampling import hash_text, mix64

_GOLDEN = np.uint64(0x9E3779B97F4A7C15)  # odd: k -> k * golden is a permutation


class Stream(IntEnum):
    """Independent sources of random numbers within one block."""

    PARTONS = 0
    RESPONSE = 1
    SHOWERED_PARTONS = 2


def check_request(n: Any, seed: Any, start: Any) -> None:
    """Refuse a number of events, a seed or a start that is not a whole number >= 0.

    Parameters
    ----------
    n, seed, start : int
        Events, seed and number of the first event.

    Raises
    ------
    OptionError
        If one is negative or not a whole number.
    """
    for name, value in (("n", n), ("seed", seed), ("start", start)):
        whole = isinstance(value, (int, np.integer)) and not isinstance(value, bool)
        if not whole or value < 0:
            msg = f"generate.{name}: a whole number >= 0 is required; got {value!r}"
            raise OptionError(msg)


def blocks_of(start: int, n: int, size: int) -> Iterator[tuple[int, slice]]:
    """Iterate over the blocks that events start .. start + n - 1 lie in.

    Parameters
    ----------
    start, n : int
        First event and number of events.
    size : int
        Events per block.

    Yields
    ------
    tuple of (int, slice)
        Number of the block, and the events of it that are wanted.
    """
    stop = start + n
    for block in range(start // size, -(-stop // size)):
        first = block * size
        yield block, slice(max(start - first, 0), min(stop - first, size))


def random_stream(
    label: str, seed: int, block: int, stream: Stream
) -> np.random.Generator:
    """Return the random numbers of one block for one purpose.

    Parameters
    ----------
    label : str
        What is generated; other labels give independent numbers for the same seed.
    seed : int
        Seed of the user.
    block : int
        Number of the block.
    stream : Stream
        Purpose.

    Returns
    -------
    numpy.random.Generator
        A counter-based generator (Philox).
    """
    sequence = np.random.SeedSequence(
        entropy=[seed, hash_text(label)], spawn_key=(int(stream), block)
    )
    return np.random.Generator(np.random.Philox(sequence))


def identities(label: str, seed: int, start: int, n: int) -> NDArray[np.uint64]:
    """Return the identities of events start .. start + n - 1, all different."""
    key = mix64(np.uint64(hash_text(f"{label}|{seed}")))
    with np.errstate(over="ignore"):
        steps = np.arange(start, start + n, dtype=np.uint64) * _GOLDEN + key
    return mix64(steps)
