"""A checksum per event, which reveals damage that a file format would not notice.

Blocks of numbers that do not compress are stored as they are by ROOT, without any
redundancy. The project's own files therefore carry one word per event.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.io.columns import Column
from toprecon.resampling import hash_text, mix64


def checksums(columns: Mapping[str, Column], n: int) -> NDArray[np.uint64]:
    """Return a checksum of every event.

    Parameters
    ----------
    columns : mapping of Column
        Numbers of the events by name; the order does not matter.
    n : int
        Events.

    Returns
    -------
    array of uint64, shape (n,)
        Any single changed bit changes the checksum of its event.

    Notes
    -----
    The bits of the numbers, times an odd constant per column, are summed modulo 2^64.
    """
    total = np.zeros(n, dtype=np.uint64)
    for name, column in columns.items():
        bits = _bits(column.values)
        if column.counts is not None:
            running = np.zeros(len(bits) + 1, dtype=np.uint64)
            np.cumsum(bits, out=running[1:])
            ends = np.cumsum(column.counts)
            bits = running[ends] - running[ends - column.counts]
        total += bits * np.uint64(hash_text(name) | 1)
    return mix64(total)


def _bits(values: NDArray[Any]) -> NDArray[np.uint64]:
    """Numbers as unsigned integers of 64 bits."""
    if values.dtype.kind == "f":
        values = np.ascontiguousarray(values).view(f"u{values.dtype.itemsize}")
    return values.astype(np.uint64)
