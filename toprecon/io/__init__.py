"""Event files in and out.

Takes: files written by others or by this package.
Gives: Events in chunks, with a report on every entry; files of Events.
"""

from __future__ import annotations

from toprecon.io.catalogue import Catalogue, load_catalogue
from toprecon.io.chunks import read_chunk
from toprecon.io.description import FileDescription, describe
from toprecon.io.layout import FileLayout, load_layout
from toprecon.io.opening import open_events
from toprecon.io.own_layout import write_events
from toprecon.io.raw import Note, Reason
from toprecon.io.references import ChunkRef, SourceDescription
from toprecon.io.report import InputReport
from toprecon.io.source import EventSource

__all__ = [
    "Catalogue",
    "ChunkRef",
    "EventSource",
    "FileDescription",
    "FileLayout",
    "InputReport",
    "Note",
    "Reason",
    "SourceDescription",
    "describe",
    "load_catalogue",
    "load_layout",
    "open_events",
    "read_chunk",
    "write_events",
]
