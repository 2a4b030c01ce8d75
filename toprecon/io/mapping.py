"""From columns to raw events, as a file layout says."""

from __future__ import annotations

import dataclasses
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError, nearest
from toprecon.events import TRUTH_MOMENTA, Sample
from toprecon.io.branches import (
    OBJECTS,
    header_branches,
    object_branches,
    part_branches,
)
from toprecon.io.checksum import checksums
from toprecon.io.columns import Column, Columns
from toprecon.io.layout import (
    ENERGY_UNITS,
    MOMENTUM_COMPONENTS,
    SLOT,
    ColumnSource,
    FileLayout,
    LeptonColumns,
    MomentumColumns,
    ObjectColumns,
)
from toprecon.io.raw import (
    EXTRAS,
    FloatArray,
    RawEvents,
    RawHeaders,
    RawObjects,
    RawTruth,
    Reason,
)

_FERMIONS = TRUTH_MOMENTA[6:]
_DEFAULTS = {"kind": 0, "jet_index": -1, "pdg": 0}


class ColumnReader:
    """Reader of a file of columns through a layout.

    Parameters
    ----------
    columns : Columns
        Open file.
    layout : FileLayout
        What its columns mean.
    samples : tuple of Sample
        Descriptions stored in the file.
    """

    def __init__(
        self, columns: Columns, layout: FileLayout, samples: tuple[Sample, ...] = ()
    ) -> None:
        self._columns = columns
        self.samples = samples
        self.n_entries = columns.n_entries
        self.tree = getattr(columns, "tree", "")
        self.notes: list[str] = []
        self.warnings: list[str] = []
        self.layout = layout
        self.layout = self._present(layout)
        self.optional = frozenset(
            name
            for name in ("particles", "photons", "missing", "truth")
            if getattr(self.layout, name)
        )
        self._header_names = header_branches(self.layout)
        self._names = sorted(object_branches(self.layout) | self._header_names)
        counters = {t.count for name in OBJECTS for t in getattr(self.layout, name)}
        self._summed = set(self._names) - counters - {self.layout.event.checksum}

    def _present(self, layout: FileLayout) -> FileLayout:
        """Leave out optional parts that the file lacks; the others must exist."""
        changes: dict[str, Any] = {}
        for name in OBJECTS:
            tables = getattr(layout, name)
            changes[name] = tuple(t for t in tables if self._has(t, f"[{name}]"))
        for name in ("missing", "truth"):
            part = getattr(layout, name)
            changes[name] = part if part and self._has(part, f"[{name}]") else None
        for branch in sorted(header_branches(layout)):
            self._require(branch, "[event]")
        return layout.model_copy(update=changes)

    def _has(self, part: Any, section: str) -> bool:
        """Whether the columns of a section exist; some but not all is an error."""
        names = part_branches(part)
        if part.optional and not any(name in self._columns.types for name in names):
            return False
        for name in sorted(names):
            self._require(name, section)
        return True

    def _require(self, name: str, section: str) -> None:
        """Raise unless the column exists."""
        if name not in self._columns.types:
            msg = (
                f"{self._columns.path}: column {name!r} is required by {section} of "
                f"layout {self.layout.name!r}, but is missing"
                f"{nearest(name, list(self._columns.types)[:200])}"
            )
            raise InputError(msg)

    def close(self) -> None:
        """Close the file."""
        self._columns.close()

    def headers(self, start: int, stop: int) -> RawHeaders:
        """Return the quantities of whole events of a range of entries."""
        values = self._columns.read(self._header_names, start, stop)
        return self._headers(_Range(values, stop - start, self._columns.path))

    def _headers(self, columns: _Range) -> RawHeaders:
        """Weights, beams and identities."""
        event = self.layout.event
        unit = ENERGY_UNITS[self.layout.energy_unit]
        sqrt_s = (
            columns.scalar(event.sqrt_s) * unit
            if event.sqrt_s
            else np.full(columns.n, np.nan)
        )
        helicity = columns.scalar(event.helicity)
        columns.problem(Reason.UNKNOWN_VALUE, ~np.isin(helicity, (-1, 0, 1)))
        return RawHeaders(
            weight=columns.scalar(event.weight),
            helicity=np.where(np.isin(helicity, (-1, 1)), helicity, 0).astype(np.int8),
            sqrt_s=sqrt_s,
            run=columns.integers(event.run, np.int64) if event.run else None,
            number=columns.integers(event.number, np.int64) if event.number else None,
            id=columns.integers(event.id, np.uint64) if event.id else None,
            sample=columns.integers(event.sample, np.int64) if event.sample else None,
        )

    def read(self, start: int, stop: int) -> RawEvents:
        """Return a range of entries."""
        layout = self.layout
        values = self._columns.read(self._names, start, stop)
        columns = _Range(values, stop - start, self._columns.path)
        unit = ENERGY_UNITS[layout.energy_unit]
        self._check_sums(columns)
        objects = {}
        for name in OBJECTS:
            tables = getattr(layout, name)
            if tables:
                parts = [_objects(name, t, columns, unit) for t in tables]
                objects[name] = RawObjects.joined(parts)
            elif name in {"jets", "leptons"}:
                objects[name] = RawObjects.none(columns.n, EXTRAS[name])
        missing = None
        if layout.missing:
            missing = _momentum(layout.missing, columns.scalars(layout.missing), unit)
        truth = self._truth(columns, unit) if layout.truth else None
        headers = self._headers(columns)
        return RawEvents(headers, objects, missing, truth, columns.problems)

    def _check_sums(self, columns: _Range) -> None:
        """Hold stored checksums against the numbers read."""
        name = self.layout.event.checksum
        if name:
            stored = columns.integers(name, np.uint64)
            parts = {k: columns.values[k] for k in self._summed}
            columns.problem(Reason.DAMAGED, stored != checksums(parts, columns.n))

    def _truth(self, columns: _Range, unit: float) -> RawTruth:
        """Return generated momenta; NaN where the file has none."""
        part = self.layout.truth
        assert part is not None
        p: dict[str, FloatArray] = {}
        pdg: dict[str, NDArray[np.int32]] = {}
        for name, table in part.momenta():
            values = columns.scalars(table)
            p[name] = _momentum(table, values, unit)
            if part.zero_is_absent:
                p[name][:, np.all(p[name] == 0, axis=0)] = np.nan
            if "pdg" in values:
                pdg[name] = _integers(values["pdg"], np.int32)
        n = columns.n
        for name in TRUTH_MOMENTA:
            if name not in p:
                p[name] = np.full((4, n), np.nan)
        for name in _FERMIONS:
            pdg.setdefault(name, np.zeros(n, dtype=np.int32))
        prime = np.full(n, np.nan)
        if part.sqrt_s_prime is not None:
            prime = columns.scalar(part.sqrt_s_prime) * unit
        return RawTruth({name: p[name] for name in TRUTH_MOMENTA}, pdg, prime)


@dataclasses.dataclass
class _Range:
    """Columns of one range of entries, and the problems met."""

    values: dict[str, Column]
    n: int
    path: str
    problems: dict[Reason, NDArray[np.bool_]] = dataclasses.field(default_factory=dict)

    def problem(self, reason: Reason, mask: NDArray[np.bool_]) -> None:
        """Note a problem of some entries."""
        if mask.any():
            known = self.problems.get(reason)
            self.problems[reason] = mask if known is None else known | mask

    def scalar(self, source: ColumnSource) -> FloatArray:
        """One number per event."""
        if source.value is not None:
            return np.full(self.n, source.value)
        column = self.values[source.branch]
        if column.counts is not None or column.values.ndim != 1:
            msg = (
                f"{self.path}: column {source.branch!r}: one number per event is "
                "required; got a list"
            )
            raise InputError(msg)
        values, unknown = evaluate(source, column.values)
        if unknown is not None:
            self.problem(Reason.UNKNOWN_VALUE, unknown)
        return values.astype(np.float64, copy=False)

    def scalars(self, table: MomentumColumns) -> dict[str, FloatArray]:
        """All quantities of a table with one number per event."""
        return {name: self.scalar(source) for name, source in table.sources().items()}

    def integers(self, branch: str, kind: Any) -> NDArray[Any]:
        """One whole number per event, without a detour over float64."""
        column = self.values[branch]
        if column.counts is not None or column.values.dtype.kind not in "iu":
            msg = (
                f"{self.path}: column {branch!r}: one whole number per event is "
                f"required; got {column.values.dtype}"
            )
            raise InputError(msg)
        return column.values.astype(kind)


def evaluate(
    source: ColumnSource, values: NDArray[Any]
) -> tuple[FloatArray, NDArray[np.bool_] | None]:
    """Apply the value map and the factor of a source to stored values.

    Parameters
    ----------
    source : ColumnSource
        How to understand the values.
    values : array, shape (N,)
        As stored.

    Returns
    -------
    array, shape (N,)
        Meaning; NaN for a stored value that is not in the map.
    array of bool, shape (N,), or None
        Which values are not in the map.
    """
    if not source.values:
        scaled = values if source.scale == 1.0 else values * np.float64(source.scale)
        return scaled, None
    fill = np.nan if source.default is None else source.default
    out = np.full(values.shape, fill, dtype=np.float64)
    known = np.zeros(values.shape, dtype=bool)
    for key, meaning in source.values.items():
        match = values == float(key)
        out[match] = meaning
        known |= match
    out *= source.scale
    return out, (~known if source.default is None and not known.all() else None)


def _objects(
    name: str, table: ObjectColumns, columns: _Range, unit: float
) -> RawObjects:
    """Objects of one table."""
    sources = table.sources()
    if table.slots:
        counts, values = _slots(table, columns)
    else:
        counts, stored = _aligned(table, columns)
        values = {}
        total = int(counts.sum())
        event = None
        for key, source in sources.items():
            if source.value is not None:
                values[key] = np.full(total, source.value)
                continue
            values[key], unknown = evaluate(source, stored[source.branch])
            if unknown is not None:
                if event is None:
                    event = np.repeat(np.arange(columns.n), counts)
                mask = np.zeros(columns.n, dtype=bool)
                mask[event[unknown]] = True
                columns.problem(Reason.UNKNOWN_VALUE, mask)
    p = _momentum(table, values, unit)
    if isinstance(table, LeptonColumns):
        _complete_leptons(table, values)
    extra = {}
    for key, kind in EXTRAS[name].items():
        given = values.get(key)
        if given is None:
            given = np.full(p.shape[1], _DEFAULTS.get(key, np.nan))
        whole = np.issubdtype(kind, np.integer)
        extra[key] = (
            _integers(given, kind) if whole else given.astype(np.float64, copy=False)
        )
    objects = RawObjects(p, counts, extra)
    if table.zero_is_absent:
        objects = objects.keep_objects(np.any(p != 0, axis=0))
    return objects


def _aligned(
    table: ObjectColumns, columns: _Range
) -> tuple[NDArray[np.int64], dict[str, NDArray[Any]]]:
    """Columns of a table with the same counts; events where they differ are emptied."""
    branches = {s.branch for s in table.sources().values() if s.branch}
    stored = {branch: columns.values[branch] for branch in sorted(branches)}
    stated = columns.integers(table.count, np.int64) if table.count else None
    lists: dict[str, tuple[NDArray[Any], NDArray[np.int64]]] = {}
    for branch, column in stored.items():
        if column.counts is not None:
            lists[branch] = (column.values, column.counts)
        elif column.values.ndim == 2 and stated is not None:
            lists[branch] = _counted(column, stated)
        else:
            msg = (
                f"{columns.path}: column {branch!r}: a list per event is required "
                "(ragged, or of fixed length with count given); got one number per "
                "event; use slots for numbered columns"
            )
            raise InputError(msg)
    counts = next(iter(lists.values()))[1]
    different = np.zeros(columns.n, dtype=bool)
    for _, own in lists.values():
        if own is not counts:
            different |= own != counts
    if stated is not None:
        different |= stated != counts
    if not different.any():
        return counts, {branch: values for branch, (values, _) in lists.items()}
    columns.problem(Reason.INCONSISTENT, different)
    kept = {
        branch: values[np.repeat(~different, own)]
        for branch, (values, own) in lists.items()
    }
    return np.where(different, 0, counts), kept


def _counted(
    column: Column, stated: NDArray[np.int64]
) -> tuple[NDArray[Any], NDArray[np.int64]]:
    """First entries of arrays of fixed length."""
    length = column.values.shape[1]
    counts = np.clip(stated, 0, length)
    mask = np.arange(length) < counts[:, None]
    return column.values[mask], counts


def _slots(
    table: ObjectColumns, columns: _Range
) -> tuple[NDArray[np.int64], dict[str, FloatArray]]:
    """Objects in numbered columns; NaN, or all zeros, means that a slot is empty."""
    stacked: dict[str, FloatArray] = {}
    for key, source in table.sources().items():
        rows = [columns.scalar(_slot(source, slot)) for slot in table.slots]
        stacked[key] = np.stack(rows, axis=1)
    parts = np.stack([stacked[c] for c in MOMENTUM_COMPONENTS if c in stacked])
    present = ~np.all(np.isnan(parts), axis=0)
    counts = present.sum(axis=1).astype(np.int64)
    return counts, {key: values[present] for key, values in stacked.items()}


def _slot(source: ColumnSource, slot: int) -> ColumnSource:
    """Return the source of one slot."""
    if source.value is not None:
        return source
    return source.model_copy(update={"branch": source.branch.replace(SLOT, str(slot))})


def _momentum(
    table: MomentumColumns, values: dict[str, FloatArray], unit: float
) -> FloatArray:
    """Components E, px, py, pz [GeV] from whatever components are given."""
    length = len(next(iter(values.values())))
    out = np.empty((4, length))
    energy, px, py, pz = out

    def given(name: str) -> FloatArray:
        return values[name].astype(np.float64, copy=False)

    # damaged values overflow here; they are found by the checks for infinity
    with np.errstate(all="ignore"):
        if table.px is not None:
            px[:], py[:], pz[:] = values["px"], values["py"], values["pz"]
        else:
            if table.pt is not None:
                pt = given("pt")
                # sinh(eta), at half the price
                growth = np.exp(given("eta"))
                np.multiply(pt, 0.5 * (growth - 1.0 / growth), out=pz)
            else:
                p, theta = given("p"), given("theta")
                pt = p * np.sin(theta)
                np.multiply(p, np.cos(theta), out=pz)
            phi = given("phi")
            np.multiply(pt, np.cos(phi), out=px)
            np.multiply(pt, np.sin(phi), out=py)
        if table.E is not None:
            energy[:] = values["E"]
        else:
            # a negative mass stands for a negative mass squared: rounding if small,
            # found by the check of E^2 < p^2 if not
            mass = given("m")
            square = mass * np.abs(mass)
            for component in (px, py, pz):
                square += component * component
            np.sqrt(np.maximum(square, 0.0), out=energy)
        if unit != 1.0:
            out *= unit
    return out


def _complete_leptons(table: LeptonColumns, values: dict[str, FloatArray]) -> None:
    """Take the charge from the code, the sign of a constant code from the charge."""
    if table.pdg is None:
        return
    if "charge" not in values:
        values["charge"] = -np.sign(values["pdg"].astype(np.float64))
    elif table.pdg.value is not None:
        values["pdg"] = -np.sign(values["charge"].astype(np.float64)) * abs(
            table.pdg.value
        )


def _integers(values: NDArray[Any], kind: Any) -> NDArray[Any]:
    """Whole numbers; what is not finite or too large becomes 0."""
    limits = np.iinfo(kind)
    good = (values >= limits.min) & (values <= limits.max)
    return np.where(good, values, 0).astype(kind)
