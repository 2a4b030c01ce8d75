"""Who an event is: 64-bit identities and fingerprints of files.

A stored identity wins; else the hash of (sample name, run, event number); else the
hash of (fingerprint of the file, entry). So the same event keeps its identity in any
chunking, on any machine, and in copies of the file.
"""

from __future__ import annotations

import contextlib
import hashlib
from collections.abc import Iterator
from enum import StrEnum
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError
from toprecon.io.raw import RawHeaders
from toprecon.resampling import hash_text, mix64

WHOLE = 1 << 24
"""Bytes up to which the whole file is hashed."""

_BLOCK = 1 << 16
_SPREAD = 64


class Identity(StrEnum):
    """What the identities of a file are made of."""

    STORED = "stored"
    NUMBER = "number"
    ENTRY = "entry"


def identities(
    kind: Identity,
    headers: RawHeaders,
    *,
    start: int,
    sample_names: list[str],
    fingerprint: str,
) -> NDArray[np.uint64]:
    """Return the identity of every entry of a range.

    Parameters
    ----------
    kind : Identity
        What they are made of.
    headers : RawHeaders, length E
        Stored identities, run and event numbers.
    start : int
        First entry.
    sample_names : list of str
        Samples of the file; ``headers.sample`` points into it.
    fingerprint : str
        Of the file.

    Returns
    -------
    array of uint64, shape (E,)
        Identities.
    """
    if kind is Identity.STORED:
        assert headers.id is not None
        return headers.id
    if kind is Identity.ENTRY:
        entries = np.arange(start, start + len(headers), dtype=np.uint64)
        return mix64(mix64(np.uint64(hash_text(fingerprint))) ^ entries)
    assert headers.number is not None
    names = np.array([hash_text(name) for name in sample_names], dtype=np.uint64)
    row: Any = headers.sample if headers.sample is not None else 0
    run = headers.run if headers.run is not None else np.zeros(1, dtype=np.int64)
    words = mix64(mix64(names[row]) ^ run.astype(np.uint64))
    return mix64(words ^ headers.number.astype(np.uint64))


def fingerprint(path: str) -> str:
    """Return a hash of the content of a file, local or remote.

    Files up to 16 MiB are hashed whole; of larger ones the size, both ends and 64
    blocks in between, so that it stays fast for any size.

    Parameters
    ----------
    path : str
        Path or URL.

    Returns
    -------
    str
        32 hexadecimal digits.

    Raises
    ------
    InputError
        If the file cannot be read.
    """
    digest = hashlib.sha256()
    try:
        with opened(path) as (stream, size):
            digest.update(str(size).encode())
            if size <= WHOLE:
                digest.update(stream.read())
            else:
                for position in np.linspace(0, size - _BLOCK, _SPREAD + 2).astype(int):
                    stream.seek(int(position))
                    digest.update(stream.read(_BLOCK))
    except (OSError, ValueError, ImportError) as error:
        msg = f"{path}: cannot be read ({error})"
        raise InputError(msg) from error
    return digest.hexdigest()[:32]


@contextlib.contextmanager
def opened(path: str) -> Iterator[tuple[Any, int]]:
    """Open a local or remote file for reading bytes.

    Parameters
    ----------
    path : str
        Path or URL.

    Yields
    ------
    file object
        Positioned at the start.
    int
        Size in bytes.
    """
    if "://" not in path:
        with Path(path).open("rb") as stream:
            yield stream, Path(path).stat().st_size
        return
    import fsspec

    with fsspec.open(path, "rb") as stream:
        size = stream.seek(0, 2)
        stream.seek(0)
        yield stream, int(size)
