"""The first look at all files: samples, weights, identities, duplicates."""

from __future__ import annotations

import dataclasses
import math
import warnings
from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError, TopreconWarning
from toprecon.events import Helicity, Sample
from toprecon.io.beams import BeamFrame
from toprecon.io.formats import open_reader
from toprecon.io.identity import Identity, fingerprint, identities
from toprecon.io.layout import FileLayout
from toprecon.io.raw import RawHeaders, Reader
from toprecon.io.references import SourceDescription, SourceFile

SCAN = 500_000
"""Entries read at a time when only weights and identities are looked at."""


@dataclasses.dataclass(frozen=True)
class Request:
    """One file that was asked for.

    ``sample`` is what is known beforehand; fields at their default are filled from the
    file.
    """

    path: str
    tree: str
    layout: FileLayout | None
    sample: Sample
    given: frozenset[str] = frozenset()


@dataclasses.dataclass
class _Scanned:
    """What one look at the headers of a file gives."""

    file: SourceFile
    samples: tuple[Sample, ...]
    ids: NDArray[np.uint64]
    optional: frozenset[str]
    messages: list[str]
    weights: dict[str, tuple[float, float]]


def describe_source(
    requests: Sequence[Request], *, strict: bool = False
) -> SourceDescription:
    """Look at all files and describe the source.

    Parameters
    ----------
    requests : sequence of Request
        Files.
    strict : bool
        Whether an entry that is no event is an error.

    Returns
    -------
    SourceDescription
        Samples complete with entries and sums of weights, duplicates found.

    Raises
    ------
    InputError
        If a file cannot be used, or two have the same content.
    """
    table: dict[str, Sample] = {}
    scanned: list[_Scanned] = []
    prints: dict[str, str] = {}
    for request in requests:
        result = _scan(request, table)
        file = result.file
        twin = prints.setdefault(f"{file.fingerprint}{file.tree}", file.path)
        if file.entries and (
            twin != file.path or any(file.key == other.file.key for other in scanned)
        ):
            msg = f"{file.path}: has the same content as {twin}; give it once"
            raise InputError(msg)
        scanned.append(result)
    files = _with_duplicates(scanned)
    samples = tuple(table.values())
    messages = [message for result in scanned for message in result.messages]
    samples, notes = _normalised(samples, scanned)
    optional = frozenset[str]().union(*(result.optional for result in scanned))
    return SourceDescription(
        files, samples, optional, strict, tuple(dict.fromkeys(messages + notes))
    )


def _scan(request: Request, table: dict[str, Sample]) -> _Scanned:
    """Look at the headers of one file; its samples are added to the table."""
    mark = fingerprint(request.path) if "://" in request.path else ""
    reader, layout = open_reader(request.path, request.tree, request.layout)
    try:
        mark = mark or fingerprint(request.path)
        blocks = [
            reader.headers(start, min(start + SCAN, reader.n_entries))
            for start in range(0, reader.n_entries, SCAN)
        ]
        frame, energy = _frame(reader, layout)
    finally:
        reader.close()
    headers = _joined(blocks)
    messages = [f"{request.path}: {note}" for note in reader.notes]
    for text in reader.warnings:
        _warn(f"{request.path}: {text}")
        messages.append(f"{request.path}: {text}")
    unit_weights = len(headers) > 0 and not np.any(headers.weight)
    if unit_weights:
        text = f"{request.path}: all weights are 0; every event counts as 1"
        _warn(text)
        messages.append(text)
        headers.weight = np.ones(len(headers))
    identity, note = _identity(layout, headers)
    if note:
        messages.append(f"{request.path}: {note}")
    local, rows = _samples(request, reader, layout, headers)
    if math.isfinite(energy):
        local = [s.replace(sqrt_s=energy) if math.isnan(s.sqrt_s) else s for s in local]
    sums, lost = _totals(local, rows, headers, stored=bool(reader.samples))
    names = []
    for sample in sums:
        table[sample.name] = _merged(table.get(sample.name), sample, request.path)
        names.append(sample.name)
    order = {name: row for row, name in enumerate(table)}
    where = tuple(order[name] for name in names)
    file = SourceFile(
        path=request.path,
        tree=getattr(reader, "tree", request.tree) or request.tree,
        layout=layout,
        fingerprint=mark,
        entries=reader.n_entries,
        rows=where,
        sample_names=tuple(names),
        identity=identity,
        frame=frame,
        unit_weights=unit_weights,
        lost={where[i]: value for i, value in lost.items()},
    )
    headers.sample = rows if len(names) > 1 else None
    ids = identities(identity, headers, start=0, sample_names=names, fingerprint=mark)
    weights = _range_of_weights(sums, rows, headers.weight)
    return _Scanned(file, sums, ids, reader.optional, messages, weights)


def _warn(text: str) -> None:
    """Warn the caller of open_events."""
    warnings.warn(text, TopreconWarning, stacklevel=5)


def _joined(blocks: list[RawHeaders]) -> RawHeaders:
    """Headers of all blocks."""
    if not blocks:
        nothing = np.zeros(0)
        return RawHeaders(nothing, nothing.astype(np.int8), nothing)
    if len(blocks) == 1:
        return blocks[0]
    fields: dict[str, Any] = {}
    for field in dataclasses.fields(RawHeaders):
        parts = [getattr(block, field.name) for block in blocks]
        fields[field.name] = None if parts[0] is None else np.concatenate(parts)
    return RawHeaders(**fields)


def _frame(reader: Reader, layout: FileLayout) -> tuple[BeamFrame, float]:
    """How the beams lie and collide: as the layout says, else as the beams show."""
    beams = layout.beams
    look = getattr(reader, "beam_frame", None)
    found, energy = None, math.nan
    if look is not None and reader.n_entries:
        found, energy = look() or (None, math.nan)
    found = found or BeamFrame()
    flipped = found.flipped
    if beams.electron_direction != "auto":
        flipped = beams.electron_direction == "-z"
    angle = beams.crossing_angle
    angle = found.crossing_angle if isinstance(angle, str) else float(angle)
    return BeamFrame(flipped, angle), energy


def _identity(layout: FileLayout, headers: RawHeaders) -> tuple[Identity, str]:
    """Choose what the identities of a file are made of, and say why if that surprises."""
    if headers.id is not None and layout.identity == "auto":
        return Identity.STORED, ""
    if layout.identity == "entry" or headers.number is None:
        return Identity.ENTRY, ""
    same = len(headers) > 1 and np.all(headers.number == headers.number[0])
    if layout.identity == "auto" and same:
        note = (
            f"all event numbers are {headers.number[0]}; the identity of an event is "
            "its place in the file"
        )
        return Identity.ENTRY, note
    return Identity.NUMBER, ""


def _samples(
    request: Request, reader: Reader, layout: FileLayout, headers: RawHeaders
) -> tuple[list[Sample], NDArray[np.int64]]:
    """Return the samples of a file, completed by its columns, and the rows of entries."""
    if reader.samples:
        rows = headers.sample
        if rows is None:
            rows = np.zeros(len(headers), dtype=np.int64)
        if len(rows) and not (rows.min() >= 0 and rows.max() < len(reader.samples)):
            msg = (
                f"{request.path}: rows of samples from 0 to {len(reader.samples) - 1} "
                f"are required; got {rows.min()} to {rows.max()}: damaged"
            )
            raise InputError(msg)
        if "name" in request.given and len(reader.samples) > 1:
            names = ", ".join(sample.name for sample in reader.samples)
            msg = (
                f"{request.path}: a file of one sample is required for sample "
                f"{request.sample.name!r}; this one stores {names}; open it by its path"
            )
            raise InputError(msg)
        return [_overridden(s, request) for s in reader.samples], rows
    sample = request.sample
    if "process" not in request.given:
        sample = sample.replace(process=layout.process)
    helicities = np.unique(headers.helicity)
    if len(helicities) == 1 and helicities[0] != 0:
        found = Helicity(int(helicities[0]))
        if "helicity" in request.given and sample.helicity is not found:
            msg = (
                f"{request.path}: helicity {sample.helicity.name} was stated, but the "
                f"file says {found.name}"
            )
            raise InputError(msg)
        sample = sample.replace(helicity=found)
    finite = headers.sqrt_s[np.isfinite(headers.sqrt_s)]
    if len(finite):
        found_energy = float(np.median(finite))
        stated = sample.sqrt_s
        # half a percent: beam spread may be folded into the stored value
        if "sqrt_s" in request.given and abs(found_energy / stated - 1) > 0.005:
            msg = (
                f"{request.path}: sqrt_s = {stated:g} GeV was stated, but the file "
                f"says {found_energy:g} GeV"
            )
            raise InputError(msg)
        if "sqrt_s" not in request.given:
            sample = sample.replace(sqrt_s=found_energy)
    return [sample], np.zeros(len(headers), dtype=np.int64)


def _overridden(sample: Sample, request: Request) -> Sample:
    """Apply to a stored description what was said on opening."""
    changes = {name: getattr(request.sample, name) for name in request.given}
    return sample.replace(**changes) if changes else sample


def _totals(
    samples: list[Sample],
    rows: NDArray[np.int64],
    headers: RawHeaders,
    *,
    stored: bool,
) -> tuple[tuple[Sample, ...], dict[int, tuple[int, float]]]:
    """Entries and sums of weights; what a writer dropped before is kept apart."""
    weight = np.where(np.isfinite(headers.weight), headers.weight, 0.0)
    entries = np.bincount(rows, minlength=len(samples))
    sums = np.bincount(rows, weight, minlength=len(samples))
    lost: dict[int, tuple[int, float]] = {}
    out = []
    for i, sample in enumerate(samples):
        n, total = int(entries[i]), float(sums[i])
        if stored and sample.entries > n:
            lost[i] = (sample.entries - n, sample.sum_of_weights - total)
            n, total = sample.entries, sample.sum_of_weights
        out.append(sample.replace(entries=n, sum_of_weights=total))
    return tuple(out), lost


def _merged(known: Sample | None, new: Sample, path: str) -> Sample:
    """One sample over several files."""
    if known is None:
        return new
    if not known.is_same_as(new):
        msg = (
            f"{path}: the files of sample {new.name!r} must agree about process, "
            f"helicity and sqrt_s; got {new.to_mapping()} after {known.to_mapping()}"
        )
        raise InputError(msg)
    return known.merged(new)


def _with_duplicates(scanned: list[_Scanned]) -> tuple[SourceFile, ...]:
    """Find entries whose identity came before, over all files."""
    lengths = [len(result.ids) for result in scanned]
    ids = np.concatenate([result.ids for result in scanned])
    first = np.ones(len(ids), dtype=bool)
    ordered = np.sort(ids)
    if np.any(ordered[1:] == ordered[:-1]):
        first[:] = False
        first[np.unique(ids, return_index=True)[1]] = True
    ends = np.cumsum(lengths)
    files = []
    for result, end, length in zip(scanned, ends, lengths, strict=True):
        again = np.flatnonzero(~first[end - length : end])
        files.append(dataclasses.replace(result.file, duplicates=again))
    return tuple(files)


def _normalised(
    samples: tuple[Sample, ...], scanned: list[_Scanned]
) -> tuple[tuple[Sample, ...], list[str]]:
    """Hold the entries against what the catalogue says was generated."""
    # where events were dropped before the files were written and all weights are
    # equal, the sum of weights of the whole sample follows from the number generated
    out, notes = [], []
    for sample in samples:
        changed = sample
        if sample.generated >= 0 and sample.entries > sample.generated:
            msg = (
                f"sample {sample.name!r}: at most the {sample.generated} generated "
                f"events that the catalogue states are allowed; its files hold "
                f"{sample.entries} entries"
            )
            raise InputError(msg)
        if 0 <= sample.entries < sample.generated:
            text = (
                f"sample {sample.name!r}: {sample.entries} entries of "
                f"{sample.generated} generated events are in the files"
            )
            if math.isnan(sample.stated_sum_of_weights):
                weights = [
                    r.weights[sample.name] for r in scanned if sample.name in r.weights
                ]
                low = min((w[0] for w in weights), default=math.nan)
                high = max((w[1] for w in weights), default=math.nan)
                if low == high:
                    total = sample.generated * low
                    changed = sample.replace(stated_sum_of_weights=total)
                else:
                    text += (
                        "; their weights differ, so the sum of weights generated is "
                        "not known: state sum_of_weights in the catalogue"
                    )
            notes.append(text)
        out.append(changed)
    return tuple(out), notes


def _range_of_weights(
    samples: Sequence[Sample], rows: NDArray[np.int64], weight: NDArray[np.float64]
) -> dict[str, tuple[float, float]]:
    """Smallest and largest weight of every sample of a file."""
    out = {}
    for row, sample in enumerate(samples):
        mine = weight[(rows == row) & np.isfinite(weight)]
        if len(mine):
            out[sample.name] = (float(mine.min()), float(mine.max()))
    return out
