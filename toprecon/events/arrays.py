"""Momentum records for users, plain arrays for kernels, and the way between them.

Records are plain ``vector`` Momentum4D records with the fields E, px, py, pz [GeV]
and any extra fields; arithmetic on them works in user code. The behaviours are
registered once, here.
"""

from __future__ import annotations

from typing import Any

import awkward as ak
import numpy as np
import vector
from numpy.typing import NDArray

vector.register_awkward()

COMPONENTS = ("E", "px", "py", "pz")


def momenta(p: Any, counts: Any = None, **extra: Any) -> ak.Array:
    """Make momentum records from components.

    Parameters
    ----------
    p : array, shape (4, N)
        Components E, px, py, pz [GeV].
    counts : array of int, shape (E,), optional
        Objects per event; makes the result ragged (E, J) with N = sum of counts.
    **extra : array, shape (N,)
        Further fields of each record, such as ``btag``.

    Returns
    -------
    ak.Array
        Records ``Momentum4D``, shape (N,) or ragged (E, J).
    """
    fields = {
        name: np.asarray(p[i], dtype=np.float64) for i, name in enumerate(COMPONENTS)
    }
    fields.update({name: np.asarray(value) for name, value in extra.items()})
    return record_of(fields, counts, name="Momentum4D")


def record_of(
    fields: dict[str, Any], counts: Any = None, *, name: str | None = None
) -> ak.Array:
    """Make an array of records that share one offsets array.

    Parameters
    ----------
    fields : dict of array, shape (N,)
        Columns.
    counts : array of int, shape (E,), optional
        Entries per event.
    name : str, optional
        Record name; ``"Momentum4D"`` gives vector arithmetic.

    Returns
    -------
    ak.Array
        Shape (N,), or ragged (E, J).
    """
    arrays = [
        value.layout if isinstance(value, ak.Array) else ak.contents.NumpyArray(value)
        for value in fields.values()
    ]
    parameters = {"__record__": name} if name else None
    length = len(arrays[0]) if arrays else 0
    content: Any = ak.contents.RecordArray(
        arrays, list(fields), length=length, parameters=parameters
    )
    if counts is not None:
        offsets = np.zeros(len(counts) + 1, dtype=np.int64)
        np.cumsum(np.asarray(counts, dtype=np.int64), out=offsets[1:])
        content = ak.contents.ListOffsetArray(ak.index.Index64(offsets), content)
    return ak.Array(content)


def components(records: ak.Array) -> NDArray[np.float64]:
    """Return the components of flat momentum records.

    Parameters
    ----------
    records : ak.Array, shape (N,)
        Momentum records.

    Returns
    -------
    array, shape (4, N)
        E, px, py, pz [GeV], float64, contiguous.
    """
    return np.stack(
        [
            ak.to_numpy(records[name]).astype(np.float64, copy=False)
            for name in COMPONENTS
        ]
    )


def dense(records: ak.Array, n: int, field: str | None = None) -> NDArray[Any]:
    """Return the first n objects of every event as a rectangular array.

    Parameters
    ----------
    records : ak.Array, ragged (E, J)
        Momentum records.
    n : int
        Objects kept per event, in the order stored.
    field : str, optional
        One field instead of the four components.

    Returns
    -------
    array, shape (4, E, n), or (E, n) with ``field``
        Absent objects are NaN.
    """
    names = COMPONENTS if field is None else (field,)
    padded = ak.pad_none(records, n, axis=1, clip=True)
    out = np.stack(
        [
            ak.to_numpy(ak.fill_none(padded[name], np.nan)).astype(
                np.float64, copy=False
            )
            for name in names
        ]
    ).reshape(len(names), len(records), n)
    return out if field is None else out[0]
