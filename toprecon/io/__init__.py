"""Event files in and out.

Takes: files written by others or by this package.
Gives: Events in chunks, with a report on every entry; files of Events.
"""

from __future__ import annotations

from toprecon.io.layout import FileLayout, load_layout
from toprecon.io.opening import open_events
from toprecon.io.own_layout import write_events
from toprecon.io.raw import Note, Reason
from toprecon.io.report import InputReport
from toprecon.io.source import ChunkRef, EventSource, SourceDescription, read_chunk

__all__ = [
    "ChunkRef",
    "EventSource",
    "FileLayout",
    "InputReport",
    "Note",
    "Reason",
    "SourceDescription",
    "load_layout",
    "open_events",
    "read_chunk",
    "write_events",
]
