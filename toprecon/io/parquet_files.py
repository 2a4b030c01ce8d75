"""Columns of a Parquet file, nested or flat.

The columns of nested events are named by the path to them: ``jets.E``,
``truth.top.px``. Row groups bound the memory of a read; files written here have one
per chunk and carry checksums.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from pathlib import Path
from typing import Any

import awkward as ak
import numpy as np

from toprecon.errors import InputError
from toprecon.io.columns import Column, as_column
from toprecon.io.own_layout import BASKET, SAMPLES_KEY
from toprecon.io.root_columns import short


class ParquetColumns:
    """Columns of one Parquet file.

    Parameters
    ----------
    path : str
        Path or URL.
    """

    tree = ""

    def __init__(self, path: str) -> None:
        import pyarrow.parquet as pq

        self.path = path
        self._stream: Any = None
        try:
            if "://" in path:
                import fsspec

                self._stream = fsspec.open(path, "rb").open()
            self._file = pq.ParquetFile(
                self._stream if self._stream is not None else path,
                page_checksum_verification=True,
            )
            schema = self._file.schema_arrow
            self._leaves = dict(_leaves(schema))
            metadata = self._file.metadata
            rows = [
                metadata.row_group(i).num_rows for i in range(metadata.num_row_groups)
            ]
        # a damaged file can raise anything inside the reading library
        except Exception as error:
            self.close()
            msg = f"{path}: a readable Parquet file is required; got {short(error)}"
            raise InputError(msg) from error
        self._ends = np.cumsum([0, *rows])
        self.n_entries = int(self._ends[-1])
        self.types = {name: kind for name, (_, kind) in self._leaves.items()}
        self._metadata = schema.metadata or {}

    def text(self, key: str) -> str:
        """Return a text stored beside the columns, empty if there is none."""
        return self._metadata.get(key.encode(), b"").decode("utf-8", "replace")

    def read(self, names: Iterable[str], start: int, stop: int) -> dict[str, Column]:
        """Return columns of a range of entries.

        Parameters
        ----------
        names : iterable of str
            Columns.
        start, stop : int
            First entry, and the one after the last.

        Returns
        -------
        dict of Column
            By name.

        Raises
        ------
        InputError
            If they cannot be read.
        """
        wanted = list(dict.fromkeys(names))
        if not wanted or stop <= start:
            return {name: self._empty(name) for name in wanted}
        first = int(np.searchsorted(self._ends, start, side="right")) - 1
        last = int(np.searchsorted(self._ends, stop, side="left"))
        try:
            table = self._file.read_row_groups(
                list(range(first, last)),
                columns=[self._leaves[name][0] for name in wanted],
                use_threads=False,
            ).slice(start - int(self._ends[first]), stop - start)
            arrays = {name: _leaf(table, name) for name in wanted}
        except Exception as error:
            msg = f"{self.path}: entries {start} to {stop} are damaged: {short(error)}"
            raise InputError(msg) from error
        out = {}
        for name, array in arrays.items():
            if len(array) != stop - start:
                msg = f"{self.path}: {name}: {len(array)} entries read: damaged"
                raise InputError(msg)
            out[name] = as_column(array, where=f"{self.path}: {name}")
        return out

    def _empty(self, name: str) -> Column:
        """Return a column without entries."""
        lists = "list" in self.types[name]
        counts = np.zeros(0, dtype=np.int64) if lists else None
        whole = "int" in self.types[name]
        return Column(np.zeros(0, dtype=np.int64 if whole else np.float64), counts)

    def close(self) -> None:
        """Close the file."""
        file = getattr(self, "_file", None)
        if file is not None:
            file.close()
        if self._stream is not None:
            self._stream.close()


def _leaves(schema: Any) -> Iterator[tuple[str, tuple[str, str]]]:
    """Name of every column of numbers -> its path in the file and its type."""
    for field in schema:
        yield from _below(field.name, field.name, field.type, "")


def _below(
    name: str, path: str, kind: Any, wrapper: str
) -> Iterator[tuple[str, tuple[str, str]]]:
    """Columns below one field."""
    import pyarrow.types as pat

    if pat.is_struct(kind):
        for field in kind:
            yield from _below(
                f"{name}.{field.name}", f"{path}.{field.name}", field.type, wrapper
            )
    elif pat.is_list(kind) or pat.is_large_list(kind) or pat.is_fixed_size_list(kind):
        inner = f"{path}.list.{kind.value_field.name}"
        yield from _below(name, inner, kind.value_type, f"{wrapper}list of ")
    else:
        yield name, (path, f"{wrapper}{kind}")


def _leaf(table: Any, name: str) -> ak.Array:
    """One column of a table as an awkward array."""
    head, *rest = name.split(".")
    array = ak.from_arrow(table.select([head]))[head]
    for part in rest:
        array = array[part]
    return ak.to_packed(array)


def write_parquet(stored: ak.Array, path: Path, text: str) -> None:
    """Write stored parts of events with the descriptions of their samples.

    Parameters
    ----------
    stored : ak.Array, shape (E,)
        From :func:`toprecon.io.own_layout.cast_events`.
    path : Path
        File to write.
    text : str
        Descriptions in JSON.
    """
    import pyarrow.parquet as pq

    table = ak.to_arrow_table(stored, extensionarray=False, list_to32=True)
    table = table.replace_schema_metadata({SAMPLES_KEY: text})
    pq.write_table(
        table,
        path,
        compression="zstd",
        row_group_size=BASKET,
        write_page_checksum=True,
    )
