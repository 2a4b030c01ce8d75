"""The event table: one row per accepted input event, selected or not.

It is the cheap side of the house: everything after it is masks and sums. Columns
are numpy arrays; the file is Parquet with the metadata in its schema, so that any
Parquet reader can open it.
"""

from __future__ import annotations

import dataclasses
import json
import os
from collections.abc import Iterator, Sequence
from functools import cached_property
from pathlib import Path
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError, MissingFieldError, nearest
from toprecon.events.binning import Binning
from toprecon.events.cutflow import CutFlow
from toprecon.events.samples import Sample
from toprecon.resampling import in_half_a

COLUMNS = {
    "id": np.uint64,
    "sample": np.int16,
    "weight": np.float64,
    "is_signal": np.bool_,
    "stage": np.uint8,
    "status": np.uint8,
    "branch": np.uint8,
    "pairing_class": np.uint8,
    "cos_theta_true": np.float64,
    "cos_theta_closest": np.float64,
    "cos_theta_chosen": np.float64,
    "cos_theta_reco": np.float64,
}
"""Columns every table has, with their types; observables are float32 columns."""

_METADATA_KEY = b"toprecon"
_FORMAT_VERSION = 1


@dataclasses.dataclass(frozen=True)
class EventTable:
    """One row per event.

    Parameters
    ----------
    columns : dict of array, shape (E,)
        :data:`COLUMNS`, further angle columns, and one float32 column per observable.
    samples : tuple of Sample
        Rows that the ``sample`` column points to.
    stages : tuple of str
        Names of the selection steps; ``stage`` is 0 or 1 + index of the failed step.
    provenance : dict
        Plain data: the reconstruct part of the plan (``plan``, TOML text), its hash
        (``plan_hash``), fingerprints of the inputs and the version of the package.
    """

    columns: dict[str, NDArray[Any]]
    samples: tuple[Sample, ...]
    stages: tuple[str, ...]
    provenance: dict[str, Any] = dataclasses.field(default_factory=dict)

    def __post_init__(self) -> None:
        columns = dict(self.columns)
        for name, kind in COLUMNS.items():
            if name not in columns:
                msg = f"event table: column {name!r} is required, but is missing"
                raise MissingFieldError(msg)
            columns[name] = np.asarray(columns[name], dtype=kind)
        object.__setattr__(self, "columns", columns)
        lengths = {name: len(column) for name, column in self.columns.items()}
        if len(set(lengths.values())) > 1:
            msg = f"event table: columns must have the same length; got {lengths}"
            raise InputError(msg)
        row = columns["sample"]
        if len(row) and not 0 <= row.min() <= row.max() < len(self.samples):
            msg = (
                f"event table: rows of samples from 0 to {len(self.samples) - 1} are "
                f"required; got {row.min()} to {row.max()}"
            )
            raise InputError(msg)

    def __len__(self) -> int:
        return len(self.columns["id"])

    def __getitem__(self, name: str) -> NDArray[Any]:
        try:
            return self.columns[name]
        except KeyError:
            msg = f"event table: no column {name!r}{nearest(name, self.columns)}"
            raise MissingFieldError(msg) from None

    def __contains__(self, name: str) -> bool:
        return name in self.columns

    def __iter__(self) -> Iterator[str]:
        return iter(self.columns)

    @property
    def observables(self) -> tuple[str, ...]:
        """Names of the observable columns."""
        return tuple(name for name in self.columns if "." in name)

    @property
    def is_signal_process(self) -> NDArray[np.bool_]:
        """Which rows belong to a top-pair sample, shape (E,)."""
        flags = np.array([s.is_signal_process for s in self.samples], dtype=bool)
        return flags[self["sample"]]

    @property
    def helicity(self) -> NDArray[np.int8]:
        """Beam helicity of every row, shape (E,): -1, +1, or 0 for mixed beams."""
        values = np.array([int(s.helicity) for s in self.samples], dtype=np.int8)
        return values[self["sample"]]

    def bins(self, name: str, binning: Binning) -> NDArray[np.int16]:
        """Return the bin of every row, worked out once per column and binning.

        Parameters
        ----------
        name : str
            Column.
        binning : Binning
            Bins.

        Returns
        -------
        array of int16, shape (E,)
            As :meth:`Binning.digitise`: -1 outside the edges and for NaN.
        """
        key = (name, binning)
        if key not in self._bins:
            self._bins[key] = binning.digitise(self[name]).astype(np.int16)
        return self._bins[key]

    @cached_property
    def _bins(self) -> dict[tuple[str, Binning], NDArray[np.int16]]:
        return {}

    @cached_property
    def in_half_a(self) -> NDArray[np.bool_]:
        """Which rows belong to half A by their identity, shape (E,)."""
        return in_half_a(self["id"])

    @cached_property
    def by_sample(self) -> tuple[tuple[NDArray[np.intp], Self], ...]:
        """Rows of every sample, and their table without the observables."""
        base = {n: c for n, c in self.columns.items() if "." not in n}
        if len(self.samples) == 1:
            part = dataclasses.replace(self, columns=base)
            return ((np.arange(len(self)), part),)
        out = []
        for row, sample in enumerate(self.samples):
            mine = np.flatnonzero(self["sample"] == row)
            columns = {n: c[mine] for n, c in base.items()}
            columns["sample"] = np.zeros(len(mine), dtype=np.int16)
            part = dataclasses.replace(self, columns=columns, samples=(sample,))
            out.append((mine, part))
        return tuple(out)

    def cut_flow(self, weight: NDArray[np.float64] | None = None) -> CutFlow:
        """Return the cut flow of the selection steps.

        Parameters
        ----------
        weight : array, shape (E,), optional
            Event weights; the generator weights if not given.

        Returns
        -------
        CutFlow
            Beginning with all rows.
        """
        weights = self["weight"] if weight is None else weight
        return CutFlow.from_stage(self["stage"], weights, self.stages)

    def take(self, rows: Any) -> Self:
        """Return the table of some rows (mask or indices)."""
        columns = {name: column[rows] for name, column in self.columns.items()}
        return dataclasses.replace(self, columns=columns)

    @classmethod
    def concatenate(cls, tables: Sequence[Self]) -> Self:
        """Join tables, merging samples of the same name.

        Sums of weights and entries of one sample are added.

        Parameters
        ----------
        tables : sequence of EventTable
            Made with the same plan.

        Returns
        -------
        EventTable
            Rows in the order given.

        Raises
        ------
        InputError
            If there are none, or they differ in plan, columns or samples.
        """
        if not tables:
            msg = "event tables: at least one is required; got none"
            raise InputError(msg)
        first = tables[0]
        samples: dict[str, Sample] = {}
        for table in tables:
            if table.provenance.get("plan_hash") != first.provenance.get("plan_hash"):
                msg = "event tables: made with different plans; reconstruct them again"
                raise InputError(msg)
            if table.stages != first.stages or set(table.columns) != set(first.columns):
                msg = "event tables: have different columns or selection steps"
                raise InputError(msg)
            for sample in table.samples:
                known = samples.get(sample.name)
                samples[sample.name] = known.merged(sample) if known else sample
        order = {name: row for row, name in enumerate(samples)}
        columns = {
            name: np.concatenate([t[name] for t in tables]) for name in first.columns
        }
        columns["sample"] = np.concatenate(
            [
                np.array([order[s.name] for s in t.samples], np.int16)[t["sample"]]
                for t in tables
            ]
        )
        inputs = [x for t in tables for x in t.provenance.get("inputs", [])]
        provenance = (
            {**first.provenance, "inputs": inputs} if inputs else first.provenance
        )
        return cls(columns, tuple(samples.values()), first.stages, provenance)

    def save(self, path: str | os.PathLike[str]) -> Path:
        """Write the table to a Parquet file, complete or not at all.

        Parameters
        ----------
        path : path
            File to write; replaced if it exists.

        Returns
        -------
        Path
            The file written.
        """
        import pyarrow as pa
        import pyarrow.parquet as pq

        target = Path(path)
        metadata = {
            "version": _FORMAT_VERSION,
            "samples": [sample.to_mapping() for sample in self.samples],
            "stages": list(self.stages),
            "provenance": self.provenance,
        }
        text = json.dumps(metadata, sort_keys=True).encode()
        table = pa.table({name: pa.array(c) for name, c in self.columns.items()})
        table = table.replace_schema_metadata({_METADATA_KEY: text})
        target.parent.mkdir(parents=True, exist_ok=True)
        partial = target.with_name(f".{target.name}.{os.getpid()}.part")
        try:
            pq.write_table(table, partial, compression="zstd", write_page_checksum=True)
            partial.replace(target)
        finally:
            partial.unlink(missing_ok=True)
        return target

    @staticmethod
    def is_saved(path: str | os.PathLike[str]) -> bool:
        """Whether a file is an event table written by :meth:`save`."""
        import pyarrow as pa
        import pyarrow.parquet as pq

        try:
            return _METADATA_KEY in (pq.read_schema(path).metadata or {})
        except (pa.ArrowException, OSError, ValueError):
            return False

    @classmethod
    def load(cls, path: str | os.PathLike[str]) -> Self:
        """Read a table written by :meth:`save`.

        Parameters
        ----------
        path : path
            Parquet file.

        Returns
        -------
        EventTable
            Equal to the one saved.

        Raises
        ------
        InputError
            If the file is missing, damaged or not an event table.
        """
        import pyarrow as pa
        import pyarrow.parquet as pq

        source = Path(path)
        if not source.is_file():
            msg = f"{source}: an event table is required, but there is no such file"
            raise InputError(msg)
        try:
            table = pq.read_table(source, page_checksum_verification=True)
        except (pa.ArrowException, OSError, ValueError) as error:
            msg = f"{source}: not a readable Parquet file ({error})"
            raise InputError(msg) from error
        text = (table.schema.metadata or {}).get(_METADATA_KEY)
        if text is None:
            msg = (
                f"{source}: an event table is required, but this Parquet file holds "
                "none; open events with toprecon.open_events instead"
            )
            raise InputError(msg)
        metadata = json.loads(text)
        if metadata.get("version") != _FORMAT_VERSION:
            msg = (
                f"{source}: event table of version {_FORMAT_VERSION} is required; got "
                f"{metadata.get('version')!r}; reconstruct the events again"
            )
            raise InputError(msg)
        columns = {name: table.column(name).to_numpy() for name in table.column_names}
        samples = tuple(Sample.from_mapping(row) for row in metadata["samples"])
        return cls(columns, samples, tuple(metadata["stages"]), metadata["provenance"])
