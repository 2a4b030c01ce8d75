"""Storing: rounded numbers, a hash of the content, text files whole or not at all."""

from __future__ import annotations

import hashlib
import os
from pathlib import Path
from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.events import samples_of, with_samples
from toprecon.kinematics import mass, momentum

COMPONENTS = ("E", "px", "py", "pz")
NOT_ROUNDED = {"id", "weight", "sample", "helicity", "sqrt_s"}


def content_checksum(events: ak.Array) -> str:
    """Return a hash of the content of events.

    Parameters
    ----------
    events : ak.Array
        Events.

    Returns
    -------
    str
        SHA-256 over all columns in alphabetical order: equal for equal content, however
        the events were made, stored or read.
    """
    whole = hashlib.sha256()
    for name, column in sorted(_columns(events).items()):
        whole.update(name.encode())
        flat = ak.to_numpy(ak.flatten(column, axis=None))
        if column.ndim > 1:
            whole.update(ak.to_numpy(ak.num(column, axis=1)).astype("<i8").tobytes())
        kind = "<u8" if flat.dtype == np.uint64 else "<f8"
        # one bit pattern for every NaN and for both zeros
        values = flat.astype(kind) + (0 if kind == "<u8" else 0.0)
        if kind == "<f8":
            values[np.isnan(values)] = np.nan
        whole.update(values.tobytes())
    return whole.hexdigest()


def rounded(events: ak.Array, bits: int) -> ak.Array:
    """Return events with floating-point numbers rounded to some bits of mantissa.

    Parameters
    ----------
    events : ak.Array
        Events.
    bits : int
        Bits kept, 8 to 52.

    Returns
    -------
    ak.Array
        Momenta keep their masses; weights and identities are untouched.
    """
    if bits >= 52:
        return events
    fields = {
        name: events[name]
        if name in NOT_ROUNDED
        else ak.transform(lambda layout, **_: _round_leaf(layout, bits), events[name])
        for name in events.fields
    }
    out = ak.Array(
        ak.contents.RecordArray(
            [x.layout for x in fields.values()], list(fields), length=len(events)
        )
    )
    return with_samples(out, samples_of(events))


def write_text(path: Path, text: str) -> None:
    """Write a text file, complete or not at all."""
    partial = path.with_name(f".{path.name}.{os.getpid()}.part")
    partial.write_text(text, encoding="utf-8")
    partial.replace(path)


def _round_leaf(layout: Any, bits: int) -> Any:
    """Round a column of floats, or momenta keeping their masses."""
    if isinstance(layout, ak.contents.RecordArray) and layout.parameter("__record__"):
        return _round_momenta(layout, bits)
    if not isinstance(layout, ak.contents.NumpyArray):
        return None
    data = np.asarray(layout.data)
    if data.dtype != np.float64:
        return layout
    return ak.contents.NumpyArray(_round(data, bits))


def _round_momenta(layout: Any, bits: int) -> Any:
    """Round the three-momentum; the energy follows from it and the mass."""
    columns = dict(zip(layout.fields, layout.contents, strict=True))
    p = np.stack([np.asarray(columns[c].data)[: len(layout)] for c in COMPONENTS])
    m = mass(p)
    p[1:] = _round(p[1:], bits)
    p[0] = _round(np.sqrt(m**2 + momentum(p) ** 2), max(bits, 23))
    new = dict(zip(COMPONENTS, p, strict=True))
    contents = [
        ak.contents.NumpyArray(new[name]) if name in new else _round_leaf(column, bits)
        for name, column in columns.items()
    ]
    return ak.contents.RecordArray(
        contents, list(columns), length=len(layout), parameters=layout.parameters
    )


def _round(values: NDArray[np.float64], bits: int) -> NDArray[np.float64]:
    """Round to some bits of mantissa."""
    mantissa, exponent = np.frexp(values)
    scale = float(2**bits)
    return np.asarray(np.ldexp(np.rint(mantissa * scale) / scale, exponent))


def _columns(events: ak.Array, prefix: str = "") -> dict[str, ak.Array]:
    """Columns of nested records by their path."""
    out: dict[str, ak.Array] = {}
    for name in events.fields:
        column = events[name]
        path = f"{prefix}{name}"
        if column.fields:
            out.update(_columns(column, f"{path}."))
        else:
            out[path] = column
    return out
