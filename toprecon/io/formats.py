"""Which reader opens a file: the built-in layouts and how they are recognised."""

from __future__ import annotations

import gzip
import os
import zlib
from pathlib import Path

from toprecon.errors import InputError, UnknownFormatError
from toprecon.io.edm4hep_collections import is_edm4hep
from toprecon.io.edm4hep_reader import Edm4hepReader
from toprecon.io.guess import guess_layout
from toprecon.io.layout import FileLayout, Format, load_layout
from toprecon.io.les_houches import LesHouchesReader
from toprecon.io.mapping import ColumnReader
from toprecon.io.own_layout import (
    SAMPLES_KEY,
    own_layout,
    own_optional_fields,
    parse_samples,
)
from toprecon.io.parquet_files import ParquetColumns
from toprecon.io.raw import Reader
from toprecon.io.root_columns import RootColumns

ROOT_MAGIC = b"root"
PARQUET_MAGIC = b"PAR1"
LES_HOUCHES_MARK = b"<LesHouchesEvents"


def as_layout(layout: FileLayout | str | os.PathLike[str] | None) -> FileLayout | None:
    """Return a layout given as such, as a path to its TOML, or not at all."""
    if layout is None or isinstance(layout, FileLayout):
        return layout
    return load_layout(layout)


def first_bytes(path: str, n: int = 512) -> bytes:
    """Return the first bytes of a file, unpacked if it is gzipped.

    Parameters
    ----------
    path : str
        Path or URL.
    n : int
        Bytes wanted.

    Returns
    -------
    bytes
        At most n.

    Raises
    ------
    InputError
        If the file cannot be read.
    """
    try:
        if "://" in path:
            import fsspec

            with fsspec.open(path, "rb") as stream:
                return bytes(stream.read(n))
        with Path(path).open("rb") as stream:
            head = stream.read(n)
        if head[:2] == b"\x1f\x8b":
            with gzip.open(path, "rb") as stream:
                return bytes(stream.read(n))
    except FileNotFoundError:
        msg = f"{path}: an event file is required, but there is no such file"
        raise InputError(msg) from None
    except ImportError as error:
        msg = f"{path}: reading from this address needs a further package ({error})"
        raise InputError(msg) from None
    except (OSError, EOFError, zlib.error) as error:
        msg = f"{path}: an event file is required, but cannot be read ({error})"
        raise InputError(msg) from None
    return head


def open_reader(
    path: str, tree: str = "", layout: FileLayout | None = None
) -> tuple[Reader, FileLayout]:
    """Open a file with the reader for it.

    Parameters
    ----------
    path : str
        Path or URL.
    tree : str
        Tree in a ROOT file; empty for the usual or the only one.
    layout : FileLayout, optional
        What its columns mean; by default the file is recognised.

    Returns
    -------
    Reader
        To be closed by the caller.
    FileLayout
        The layout used.

    Raises
    ------
    UnknownFormatError
        If nothing fits the file.
    """
    head = first_bytes(path)
    if head[:4] == ROOT_MAGIC:
        return _open_root(path, tree, layout)
    if head[:4] == PARQUET_MAGIC:
        return _open_parquet(path, layout)
    if LES_HOUCHES_MARK in head:
        layout = layout or FileLayout(name="Les Houches", format=Format.LES_HOUCHES)
        return LesHouchesReader(path), layout
    what = "the file is empty" if not head else f"its first bytes are {head[:8]!r}"
    msg = (
        f"{path}: a ROOT, Parquet or Les Houches file is required, but {what}; check "
        "the path or convert the file"
    )
    raise UnknownFormatError(msg)


def _open_root(
    path: str, tree: str, layout: FileLayout | None
) -> tuple[Reader, FileLayout]:
    """Open a ROOT file as EDM4hep or as columns."""
    wanted = tree or (layout.tree if layout is not None else "")
    columns = RootColumns(path, wanted)
    try:
        if layout is None and is_edm4hep(columns.types):
            layout = FileLayout(name="EDM4hep", format=Format.EDM4HEP)
        if layout is not None and layout.format is Format.EDM4HEP:
            return _edm4hep(columns, layout), layout
        if layout is None:
            return _recognised(columns)
        return ColumnReader(columns, layout), layout
    except BaseException:
        columns.close()
        raise


def _edm4hep(columns: RootColumns, layout: FileLayout) -> Reader:
    """Read a ROOT file as EDM4hep."""
    if not is_edm4hep(columns.types):
        msg = (
            f"{columns.path}: collections of EDM4hep are required in tree "
            f"{columns.tree!r}, but none is known by its members"
        )
        raise UnknownFormatError(msg)
    return Edm4hepReader(columns, layout, columns.collection_ids())


def _open_parquet(path: str, layout: FileLayout | None) -> tuple[Reader, FileLayout]:
    """Open a Parquet file as columns."""
    columns = ParquetColumns(path)
    try:
        if layout is None:
            return _recognised(columns)
        return ColumnReader(columns, layout), layout
    except BaseException:
        columns.close()
        raise


def _recognised(columns: RootColumns | ParquetColumns) -> tuple[Reader, FileLayout]:
    """Recognise the layout of a file of columns: our own, or by usual names."""
    text = columns.text(SAMPLES_KEY)
    if text:
        separator = "." if isinstance(columns, ParquetColumns) else "_"
        fields = own_optional_fields(columns.types, separator)
        layout = own_layout(separator, fields)
        samples = parse_samples(text, where=columns.path)
        return ColumnReader(columns, layout, samples), layout
    guess = guess_layout(columns)
    if guess.layout is None:
        msg = (
            f"{columns.path}: jets are required, but no columns for them are known by "
            "their names; describe the columns in a layout (toprecon describe lists "
            "them) and give it as layout=..."
        )
        raise UnknownFormatError(msg)
    reader = ColumnReader(columns, guess.layout)
    reader.notes.append(
        "columns were understood by their names; check with toprecon describe"
    )
    return reader, guess.layout


__all__ = ["Format", "as_layout", "first_bytes", "open_reader"]
