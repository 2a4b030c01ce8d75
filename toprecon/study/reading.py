"""Events of whatever a study can be made of, opened and in chunks."""

from __future__ import annotations

import os
from collections.abc import Iterable
from pathlib import Path
from typing import Any

import awkward as ak

from toprecon.events import EventTable
from toprecon.io import EventSource, open_events


def opened(
    source: Any, *, layout: Any = None, catalogue: Any = None
) -> EventSource | ak.Array:
    """Return events as they are, and open what names their files.

    Parameters
    ----------
    source : EventSource, events, path or list of paths
        What a study is made of.
    layout, catalogue : optional
        How to read files, see :func:`toprecon.open_events`.

    Returns
    -------
    EventSource or ak.Array
        Events in files or in memory.
    """
    if isinstance(source, (EventSource, ak.Array)):
        return source
    return open_events(source, layout=layout, catalogue=catalogue)


def event_chunks(
    source: EventSource | ak.Array, size: int
) -> tuple[int, Iterable[ak.Array]]:
    """Return how many chunks there are, and the chunks.

    Parameters
    ----------
    source : EventSource or ak.Array
        From :func:`opened`; events in memory are one chunk.
    size : int
        Events per chunk of a file, at most.

    Returns
    -------
    tuple
        Number of chunks, and an iterable of events.
    """
    if isinstance(source, ak.Array):
        return 1, [source]
    return len(source.references(size)), source.chunks(size)


def table_path(source: Any) -> str | None:
    """Return the path of a saved event table, if that is what is given.

    Parameters
    ----------
    source : object
        Whatever a study can be made of: a path, a list of one path, or something else.

    Returns
    -------
    str or None
        Of the Parquet file.
    """
    if isinstance(source, (list, tuple)) and len(source) == 1:
        (source,) = source
    if not isinstance(source, (str, os.PathLike)):
        return None
    path = Path(source)
    if path.suffix != ".parquet" or not path.is_file():
        return None
    return os.fspath(path) if EventTable.is_saved(path) else None
