"""The project's own ROOT layout: one column per quantity, nothing to guess.

A tree ``events`` with counted columns ``n_jets``, ``jets_E``, ``jets_btag`` ... and
plain ones ``missing_E``, ``truth_top_px``, ``weight``, ``id``; beside it a text
``toprecon_samples``, the descriptions of the samples in JSON.
"""

from __future__ import annotations

import contextlib
import json
import os
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import awkward as ak
import numpy as np

from toprecon.errors import InputError, OptionError
from toprecon.events import TRUTH_MOMENTA, Sample, samples_of, validate_events
from toprecon.io.checksum import checksums
from toprecon.io.columns import Column, as_column
from toprecon.io.layout import FileLayout
from toprecon.io.raw import EXTRAS, OPTIONAL
from toprecon.io.root_columns import USUAL_TREE

SAMPLES_KEY = "toprecon_samples"
BASKET = 50_000
"""Events per basket: what a chunk is by default."""

_VERSION = 1
_COMPONENTS = ("E", "px", "py", "pz")
_FERMIONS = TRUTH_MOMENTA[6:]
_HEADERS = {
    "id": np.uint64,
    "weight": np.float64,
    "sample": np.int16,
    "helicity": np.int8,
    "sqrt_s": np.float64,
}


def own_layout(separator: str = "_", fields: tuple[str, ...] = OPTIONAL) -> FileLayout:
    """Return the layout of the project's own files.

    Parameters
    ----------
    separator : str
        Between the parts of a column's name: ``_`` in ROOT, ``.`` in Parquet.
    fields : tuple of str
        Optional fields the file has.

    Returns
    -------
    FileLayout
        Layout named ``toprecon``.
    """

    def p4(*path: str) -> dict[str, str]:
        return {c: separator.join((*path, c)) for c in _COMPONENTS}

    def table(name: str) -> dict[str, Any]:
        extra = {key: separator.join((name, key)) for key in EXTRAS[name]}
        count = {"count": f"n_{name}"} if separator == "_" else {}
        return {**p4(name), **extra, **count}

    parts: dict[str, Any] = {"jets": table("jets"), "leptons": table("leptons")}
    for name in ("particles", "photons"):
        if name in fields:
            parts[name] = table(name)
    if "missing" in fields:
        parts["missing"] = p4("missing")
    if "truth" in fields:
        truth: dict[str, Any] = {name: p4("truth", name) for name in TRUTH_MOMENTA}
        for name in _FERMIONS:
            truth[name]["pdg"] = separator.join(("truth", name, "pdg"))
        truth["sqrt_s_prime"] = separator.join(("truth", "sqrt_s_prime"))
        parts["truth"] = {**truth, "zero_is_absent": False}
    # Parquet has checksums of its own
    checksum = ("checksum",) if separator == "_" else ()
    return FileLayout(
        name="toprecon",
        beams={"electron_direction": "+z", "crossing_angle": 0.0},
        event={name: name for name in (*_HEADERS, *checksum)},
        tree=USUAL_TREE if separator == "_" else "",
        **parts,
    )


def own_optional_fields(names: Any, separator: str = "_") -> tuple[str, ...]:
    """Return the optional fields that a file of the own layout has, by its columns."""
    first = {"truth": ("truth", "top", "E")}
    return tuple(
        name
        for name in OPTIONAL
        if separator.join(first.get(name, (name, "E"))) in names
    )


def write_events(
    events: ak.Array, path: str | os.PathLike[str], *, precision: str = "double"
) -> Path:
    """Write events to a file in the project's own layout, whole or not at all.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events.
    path : path
        ``.root`` or ``.parquet`` file; replaced if it exists.
    precision : {"double", "single"}
        Of momenta and scores; single precision halves the file.

    Returns
    -------
    Path
        The file written.

    Raises
    ------
    MissingFieldError
        If the events lack a required field.
    InputError
        If they hold NaN or infinity, or the suffix is not known.
    OptionError
        If the precision is not known.
    """
    target = Path(path)
    if precision not in {"double", "single"}:
        msg = f"precision: must be 'double' or 'single'; got {precision!r}"
        raise OptionError(msg)
    if target.suffix not in {".root", ".parquet"}:
        msg = (
            f"{target}: events are written to .root or .parquet files; got suffix "
            f"{target.suffix!r}"
        )
        raise InputError(msg)
    validate_events(events)
    text = samples_text(samples_of(events))
    real = np.float32 if precision == "single" else np.float64
    target.parent.mkdir(parents=True, exist_ok=True)
    with _replacing(target) as partial:
        if target.suffix == ".root":
            _write_root(events, partial, text, real)
        else:
            from toprecon.io.parquet_files import write_parquet

            write_parquet(cast_events(events, real), partial, text)
    return target


@contextlib.contextmanager
def _replacing(target: Path) -> Iterator[Path]:
    """Yield a file beside the target that takes its place at the end."""
    partial = target.with_name(f".{target.stem}.{os.getpid()}.part{target.suffix}")
    try:
        yield partial
        partial.replace(target)
    finally:
        partial.unlink(missing_ok=True)


def samples_text(samples: tuple[Sample, ...]) -> str:
    """Return descriptions of samples as JSON."""
    data = {"version": _VERSION, "samples": [s.to_mapping() for s in samples]}
    return json.dumps(data, sort_keys=True)


def parse_samples(text: str, *, where: str) -> tuple[Sample, ...]:
    """Return the samples described by :func:`samples_text`.

    Parameters
    ----------
    text : str
        JSON.
    where : str
        File, for the message.

    Returns
    -------
    tuple of Sample
        Descriptions.

    Raises
    ------
    InputError
        If the text is damaged or of another version.
    """
    try:
        data = json.loads(text)
        version = data["version"]
        if version == _VERSION:
            return tuple(Sample.from_mapping(row) for row in data["samples"])
    except (ValueError, KeyError, TypeError) as error:
        msg = f"{where}: the descriptions of its samples are damaged ({error})"
        raise InputError(msg) from error
    msg = (
        f"{where}: events of version {_VERSION} are required; got {version!r}; read "
        "them with a newer toprecon"
    )
    raise InputError(msg)


def cast_events(events: ak.Array, real: Any) -> ak.Array:
    """Return the parts of events that are stored, with their types."""
    out = {}
    for name, extra in EXTRAS.items():
        if name in events.fields:
            kinds = {**dict.fromkeys(_COMPONENTS, real), **extra}
            out[name] = ak.zip(
                {
                    key: ak.values_astype(
                        _field(events[name], key, kind), _real(kind, real)
                    )
                    for key, kind in kinds.items()
                }
            )
    if "missing" in events.fields:
        out["missing"] = _record(events.missing, _COMPONENTS, real)
    if "truth" in events.fields:
        truth = {}
        for name in TRUTH_MOMENTA:
            names = (*_COMPONENTS, "pdg") if name in _FERMIONS else _COMPONENTS
            truth[name] = _record(events.truth[name], names, real)
        truth["sqrt_s_prime"] = ak.values_astype(events.truth.sqrt_s_prime, real)
        out["truth"] = ak.zip(truth, depth_limit=1)
    for name, kind in _HEADERS.items():
        out[name] = ak.values_astype(events[name], kind)
    return ak.zip(out, depth_limit=1)


def _field(objects: ak.Array, key: str, kind: Any) -> ak.Array:
    """Return a quantity of objects, or its value for 'not known'."""
    if key in objects.fields:
        return objects[key]
    unknown = -1 if key == "jet_index" else 0 if kind is not np.float64 else np.nan
    return ak.full_like(objects.E, unknown, dtype=kind)


def _record(objects: ak.Array, names: tuple[str, ...], real: Any) -> ak.Array:
    """Quantities of one object per event."""
    return ak.zip(
        {
            name: ak.values_astype(objects[name], np.int32 if name == "pdg" else real)
            for name in names
        }
    )


def _real(kind: Any, real: Any) -> Any:
    """Return the type on disk: real numbers in the precision asked for."""
    return real if np.issubdtype(kind, np.floating) else kind


def _write_root(events: ak.Array, path: Path, text: str, real: Any) -> None:
    """Write columns and descriptions."""
    import uproot

    stored = cast_events(events, real)
    columns: dict[str, Any] = {}
    for name in stored.fields:
        part = stored[name]
        if name == "truth":
            for key in part.fields:
                inner = part[key]
                for leaf in inner.fields:
                    columns[f"truth_{key}_{leaf}"] = inner[leaf]
                if not inner.fields:
                    columns[f"truth_{key}"] = inner
        elif name == "missing":
            columns |= {f"missing_{key}": part[key] for key in part.fields}
        else:
            columns[name] = part
    columns["checksum"] = checksums(_leaves(columns), len(events))
    types = {name: _branch_type(column) for name, column in columns.items()}
    # LZ4 is read fastest, and its blocks carry checksums that reveal damage
    with uproot.recreate(path, compression=uproot.LZ4(4)) as file:
        file[SAMPLES_KEY] = text
        tree = file.mktree(
            USUAL_TREE,
            types,
            counter_name=lambda name: f"n_{name}",
            field_name=lambda outer, inner: f"{outer}_{inner}" if outer else inner,
        )
        for start in range(0, len(events), BASKET):
            part = slice(start, start + BASKET)
            tree.extend({name: column[part] for name, column in columns.items()})


def _leaves(columns: dict[str, ak.Array]) -> dict[str, Column]:
    """Columns as they will be read, by name."""
    leaves = {}
    for name, column in columns.items():
        parts = {f"{name}_{key}": column[key] for key in column.fields}
        for leaf, values in (parts or {name: column}).items():
            leaves[leaf] = as_column(values, where=leaf)
    return leaves


def _branch_type(column: ak.Array) -> Any:
    """Type of a column, given so that an empty one keeps it."""
    if isinstance(column, np.ndarray):
        return column.dtype
    if column.ndim == 1 and not column.fields:
        return ak.to_numpy(column).dtype
    return str(ak.type(column).content)
