"""One column of a file as plain arrays, and what a file of columns can do."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterable
from typing import Any, Protocol

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError


@dataclasses.dataclass(frozen=True)
class Column:
    """One column of a range of entries.

    Parameters
    ----------
    values : array, shape (N,) or (E, n)
        One number per event, or all numbers of all events one after another; two
        dimensions for arrays of fixed length.
    counts : array of int, shape (E,), optional
        Numbers per event; None for one per event and for fixed length.
    """

    values: NDArray[Any]
    counts: NDArray[np.int64] | None = None


class Columns(Protocol):
    """A file that holds one column per quantity."""

    path: str
    n_entries: int
    types: dict[str, str]

    def read(self, names: Iterable[str], start: int, stop: int) -> dict[str, Column]:
        """Return columns of a range of entries."""

    def close(self) -> None:
        """Close the file."""


def as_column(array: ak.Array, *, where: str) -> Column:
    """Return an awkward array as a column of numbers.

    Parameters
    ----------
    array : ak.Array
        Flat, of fixed length or ragged, of numbers; None becomes NaN.
    where : str
        File and name of the column, for the message.

    Returns
    -------
    Column
        Views of the array where possible.

    Raises
    ------
    InputError
        If it holds something else than numbers.
    """
    layout = array.layout
    if layout.is_indexed and not layout.is_option:
        layout = layout.project()
    if layout.is_option and array.ndim > 1:
        # a missing list is an empty one
        counts = ak.to_numpy(ak.fill_none(ak.num(array, axis=1), 0))
        flat = ak.flatten(array, axis=1)
        return Column(_numbers(flat.layout, where), counts.astype(np.int64))
    if isinstance(layout, ak.contents.ListOffsetArray | ak.contents.ListArray):
        if layout.parameter("__array__") is None:
            layout = layout.to_ListOffsetArray64(True)
            counts = np.diff(np.asarray(layout.offsets.data))
            total = int(counts.sum())
            if (counts < 0).any() or total > len(layout.content):
                msg = f"{where}: the numbers of its entries are impossible: damaged"
                raise InputError(msg)
            return Column(_numbers(layout.content[:total], where), counts)
    elif isinstance(layout, ak.contents.RegularArray):
        return Column(_numbers(ak.to_numpy(array).reshape(len(array), -1), where))
    return Column(_numbers(layout, where))


def _numbers(content: Any, where: str) -> NDArray[Any]:
    """Numbers as a numpy array, booleans as integers."""
    if isinstance(content, ak.contents.NumpyArray) and content.dtype.kind in "iuf":
        return np.asarray(content.data)
    try:
        values = ak.to_numpy(ak.Array(content))
    except (TypeError, ValueError):
        values = np.zeros(0, dtype=object)
    if isinstance(values, np.ma.MaskedArray) and not np.ma.getmaskarray(values).any():
        values = values.data
    if isinstance(values, np.ma.MaskedArray):
        values = np.ma.filled(values.astype(np.float64), np.nan)
    if values.dtype == bool:
        return values.astype(np.int8)
    if values.dtype.kind not in "iuf":
        kind = ak.type(ak.Array(content)).content
        msg = f"{where}: numbers are required; got {kind}"
        raise InputError(msg)
    return np.asarray(values)
