"""Opening event files: what is asked for becomes the description of a source."""

from __future__ import annotations

import dataclasses
import glob
import math
import os
import re
import warnings
from collections.abc import Mapping, Sequence
from pathlib import Path, PurePosixPath
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError, OptionError, TopreconWarning, nearest
from toprecon.events import Helicity, Sample
from toprecon.io.beams import BeamFrame
from toprecon.io.formats import as_layout, open_reader
from toprecon.io.identity import Identity, fingerprint, identities
from toprecon.io.layout import FileLayout
from toprecon.io.raw import RawHeaders, Reader
from toprecon.io.source import EventSource, SourceDescription, SourceFile

Paths = str | os.PathLike[str]
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


def open_events(
    paths: Paths | Sequence[Paths] | Mapping[str, Any] | None = None,
    *,
    layout: FileLayout | Paths | None = None,
    catalogue: Any = None,
    strict: bool = False,
    process: str | None = None,
    helicity: Helicity | str | None = None,
    sqrt_s: float | None = None,
) -> EventSource:
    """Open event files.

    The headers, weights and identities of all files are looked at now; the events are
    read chunk by chunk later.

    Parameters
    ----------
    paths : path, list of paths, or mapping of sample names to paths
        Files, patterns (``*``), ``file:tree``, or URLs. Without a mapping every file
        is a sample named by its stem. A ``.toml`` file is a catalogue.
    layout : FileLayout or path, optional
        What the columns mean; by default the files are recognised.
    catalogue : Catalogue or path, optional
        Samples with their files, instead of ``paths``.
    strict : bool
        Whether an entry that is no event is an error.
    process, helicity, sqrt_s : optional
        What is known of all the files: name of the process (``"ttbar"`` is the
        signal), LR, RL or MIXED beams, nominal collision energy [GeV].

    Returns
    -------
    EventSource
        The events.

    Raises
    ------
    OptionError
        If both paths and a catalogue are given, or neither, or a value is not known.
    InputError
        If a file is missing, damaged, or contradicts what is said about it.
    """
    if isinstance(paths, str | os.PathLike) and Path(paths).suffix == ".toml":
        paths, catalogue = None, catalogue if catalogue is not None else paths
    if (paths is None) == (catalogue is None):
        msg = "open_events: files or a catalogue are required; got " + (
            "neither" if paths is None else "both"
        )
        raise OptionError(msg)
    known = _known(process, helicity, sqrt_s)
    if catalogue is not None:
        from toprecon.io.catalogue import as_catalogue

        if layout is not None or known:
            msg = (
                "open_events: a catalogue says layout, process, helicity and sqrt_s "
                "itself; do not give them again"
            )
            raise OptionError(msg)
        requests = as_catalogue(catalogue).requests()
    else:
        assert paths is not None
        chosen = as_layout(layout)
        requests = [
            Request(path, tree, chosen, Sample(name, **known), frozenset(known))
            for name, path, tree in named_files(paths)
        ]
    return EventSource(describe_source(requests, strict=strict))


def _known(
    process: str | None, helicity: Helicity | str | None, sqrt_s: float | None
) -> dict[str, Any]:
    """Collect what the caller says of all samples."""
    known: dict[str, Any] = {}
    if process is not None:
        known["process"] = process
    if helicity is not None:
        if isinstance(helicity, str):
            if helicity not in Helicity.__members__:
                hint = nearest(helicity, Helicity.__members__)
                msg = f"helicity: must be LR, RL or MIXED; got {helicity!r}{hint}"
                raise OptionError(msg)
            helicity = Helicity[helicity]
        known["helicity"] = helicity
    if sqrt_s is not None:
        if not (math.isfinite(sqrt_s) and sqrt_s > 0):
            msg = f"sqrt_s: must be > 0 GeV; got {sqrt_s!r}"
            raise OptionError(msg)
        known["sqrt_s"] = float(sqrt_s)
    return known


def named_files(
    paths: Paths | Sequence[Paths] | Mapping[str, Any],
) -> list[tuple[str, str, str]]:
    """Return (sample name, path, tree) of all files asked for.

    Parameters
    ----------
    paths : path, list of paths, or mapping of sample names to paths
        As in :func:`open_events`.

    Returns
    -------
    list of tuple
        Patterns expanded and sorted.

    Raises
    ------
    InputError
        If nothing is asked for, or two files would be one sample by their names.
    """
    if isinstance(paths, Mapping):
        named = [
            (str(name), *file) for name, part in paths.items() for file in expand(part)
        ]
    else:
        named = [(stem(path), path, tree) for path, tree in expand(paths)]
        seen: dict[str, str] = {}
        for name, path, _ in named:
            if seen.setdefault(name, path) != path:
                msg = (
                    f"{path}: files without a catalogue need different names, because "
                    f"they name their samples; got {name!r} again ({seen[name]}); give "
                    "{sample name: files}"
                )
                raise InputError(msg)
    if not named:
        msg = "open_events: at least one file is required; got none"
        raise InputError(msg)
    return named


def expand(
    paths: Paths | Sequence[Paths], base: Path | None = None
) -> list[tuple[str, str]]:
    """Return (path, tree) of files given as paths, patterns, ``file:tree`` or URLs.

    Parameters
    ----------
    paths : path or list of paths
        What was asked for.
    base : Path, optional
        Folder that relative paths start from.

    Returns
    -------
    list of tuple
        In the order given; files of a pattern sorted by name.

    Raises
    ------
    InputError
        If a pattern fits no file.
    """
    if isinstance(paths, str | os.PathLike):
        paths = [paths]
    files = []
    for item in paths:
        path, tree = split_tree(os.fspath(item))
        if "://" not in path:
            path = str((base / path) if base is not None else Path(path))
            if not Path(path).exists() and any(c in path for c in "*?["):
                found = sorted(glob.glob(path, recursive=True))  # noqa: PTH207 (absolute patterns)
                if not found:
                    msg = f"{path}: a pattern for files is required; it fits none"
                    raise InputError(msg)
                files += [(name, tree) for name in found]
                continue
        files.append((path, tree))
    return files


def split_tree(path: str) -> tuple[str, str]:
    """Return path and tree of ``file.root:tree``; the tree is empty without one."""
    if "://" not in path and Path(path).exists():
        return path, ""
    match = re.fullmatch(r"(.+\.root):([^:]+)", path)
    return (match[1], match[2]) if match else (path, "")


def stem(path: str) -> str:
    """Return the name of a file without folders and suffixes."""
    name = PurePosixPath(path.split("?", maxsplit=1)[0]).name or path
    for suffix in (".gz", ".root", ".parquet", ".lhe"):
        name = name.removesuffix(suffix)
    return name


@dataclasses.dataclass
class _Scanned:
    """What one look at the headers of a file gives."""

    file: SourceFile
    samples: tuple[Sample, ...]
    ids: NDArray[np.uint64]
    optional: frozenset[str]
    messages: list[str]


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
    samples, notes = _normalised(samples)
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
        frame = _frame(reader, layout)
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
    return _Scanned(file, sums, ids, reader.optional, messages)


def _warn(text: str) -> None:
    """Warn the caller of open_events."""
    warnings.warn(text, TopreconWarning, stacklevel=6)


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


def _frame(reader: Reader, layout: FileLayout) -> BeamFrame:
    """How the beams lie: as the layout says, else as the beam particles show."""
    beams = layout.beams
    found: BeamFrame | None = None
    if "auto" in {beams.electron_direction, beams.crossing_angle}:
        look = getattr(reader, "beam_frame", None)
        found = look() if look is not None and reader.n_entries else None
    found = found or BeamFrame()
    flipped = found.flipped
    if beams.electron_direction != "auto":
        flipped = beams.electron_direction == "-z"
    angle = beams.crossing_angle
    return BeamFrame(
        flipped, found.crossing_angle if isinstance(angle, str) else float(angle)
    )


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
    same = {"entries": 0, "sum_of_weights": 0.0}
    if known.replace(**same).to_mapping() != new.replace(**same).to_mapping():
        msg = (
            f"{path}: the files of sample {new.name!r} must agree about process, "
            f"helicity and sqrt_s; got {new.to_mapping()} after {known.to_mapping()}"
        )
        raise InputError(msg)
    return known.replace(
        entries=known.entries + new.entries,
        sum_of_weights=known.sum_of_weights + new.sum_of_weights,
    )


def _with_duplicates(scanned: list[_Scanned]) -> tuple[SourceFile, ...]:
    """Find entries whose identity came before, over all files."""
    lengths = [len(result.ids) for result in scanned]
    ids = np.concatenate([result.ids for result in scanned])
    first = np.zeros(len(ids), dtype=bool)
    first[np.unique(ids, return_index=True)[1]] = True
    ends = np.cumsum(lengths)
    files = []
    for result, end, length in zip(scanned, ends, lengths, strict=True):
        again = np.flatnonzero(~first[end - length : end])
        files.append(dataclasses.replace(result.file, duplicates=again))
    return tuple(files)


def _normalised(samples: tuple[Sample, ...]) -> tuple[tuple[Sample, ...], list[str]]:
    """Hold the entries against what the catalogue says was generated."""
    out, notes = [], []
    for sample in samples:
        if sample.generated >= 0 and sample.entries != sample.generated:
            notes.append(
                f"sample {sample.name!r}: {sample.entries} entries of "
                f"{sample.generated} generated events are in the files"
            )
        out.append(sample)
    return tuple(out), notes
