"""Events in files, read chunk by chunk, here or in another process.

A source is a plain description (files, layouts, samples, identities); a chunk is a
plain reference into it. Reading a chunk needs nothing else, so the same chunk is the
same events anywhere.
"""

from __future__ import annotations

import dataclasses
import threading
import warnings
from collections.abc import Iterator

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError, OptionError, SkippedEventsWarning
from toprecon.events import Sample, with_samples
from toprecon.io.assembly import assemble
from toprecon.io.beams import BeamFrame, to_electron_frame
from toprecon.io.checks import find_notes, find_problems, first_reason
from toprecon.io.formats import open_reader
from toprecon.io.identity import Identity, fingerprint, identities
from toprecon.io.layout import FileLayout
from toprecon.io.raw import RawEvents, RawHeaders, Reader, Reason
from toprecon.io.report import Count, InputReport

CHUNK = 50_000
"""Events per chunk: fast, and the memory stays below some 100 MB."""


@dataclasses.dataclass(frozen=True, order=True)
class ChunkRef:
    """A range of entries of one file; plain data, hashable and sortable.

    Parameters
    ----------
    sample : str
        Sample the entries belong to; several names joined by ``+`` if the file holds
        several samples.
    path, tree : str
        The file, and the tree in it.
    fingerprint : str
        Hash of the content of the file.
    start, stop : int
        First entry, and the one after the last.
    """

    sample: str
    path: str
    tree: str
    fingerprint: str
    start: int
    stop: int


@dataclasses.dataclass(frozen=True)
class SourceFile:
    """One file of a source, as plain data.

    Parameters
    ----------
    path, tree : str
        Where it is.
    layout : FileLayout
        What its columns mean.
    fingerprint : str
        Hash of its content.
    entries : int
        Entries.
    rows : tuple of int
        Rows of the source's samples that the file's own rows stand for.
    sample_names : tuple of str
        Names of these samples, for identities.
    identity : Identity
        What identities are made of.
    frame : BeamFrame
        How the beams lie.
    unit_weights : bool
        Whether all weights are zero in the file and count as 1.
    lost : dict
        Row -> (entries, sum of weights) that a writer dropped before; they are
        accounted to the first chunk.
    duplicates : array of int
        Entries whose identity came before in the source, increasing.
    """

    path: str
    tree: str
    layout: FileLayout
    fingerprint: str
    entries: int
    rows: tuple[int, ...]
    sample_names: tuple[str, ...]
    identity: Identity = Identity.ENTRY
    frame: BeamFrame = dataclasses.field(default_factory=BeamFrame)
    unit_weights: bool = False
    lost: dict[int, tuple[int, float]] = dataclasses.field(default_factory=dict)
    duplicates: NDArray[np.int64] = dataclasses.field(
        default_factory=lambda: np.zeros(0, dtype=np.int64)
    )

    @property
    def key(self) -> tuple[str, str, str]:
        """What names the file in a reference."""
        return (self.path, self.tree, self.fingerprint)


@dataclasses.dataclass(frozen=True)
class SourceDescription:
    """All that is needed to read any chunk of a source; plain data, picklable.

    Parameters
    ----------
    files : tuple of SourceFile
        In the order given.
    samples : tuple of Sample
        Descriptions, with entries and sums of weights of the whole source.
    optional : frozenset of str
        Optional fields that all chunks have.
    strict : bool
        Whether an entry that is no event is an error.
    messages : tuple of str
        What should be known of the files.
    """

    files: tuple[SourceFile, ...]
    samples: tuple[Sample, ...]
    optional: frozenset[str]
    strict: bool = False
    messages: tuple[str, ...] = ()

    def file_of(self, ref: ChunkRef) -> SourceFile:
        """Return the file that a reference points into.

        Parameters
        ----------
        ref : ChunkRef
            Reference.

        Returns
        -------
        SourceFile
            The file.

        Raises
        ------
        InputError
            If this source does not have it.
        """
        for file in self.files:
            if file.key == (ref.path, ref.tree, ref.fingerprint):
                return file
        msg = f"{ref.path}: not a file of this source, or changed since it was opened"
        raise InputError(msg)


_open_files = threading.local()


def read_chunk(
    ref: ChunkRef, description: SourceDescription
) -> tuple[ak.Array, InputReport]:
    """Read one chunk, in any process.

    The file is opened again unless the chunk before, in the same thread, was of the
    same file.

    Parameters
    ----------
    ref : ChunkRef
        What to read.
    description : SourceDescription
        The source, from :attr:`EventSource.description`.

    Returns
    -------
    ak.Array
        Events; entries and sums of weights of their samples are those of the chunk.
    InputReport
        What became of every entry.

    Raises
    ------
    InputError
        If the file is missing, damaged or changed; in strict mode, if an entry is no
        event.
    """
    file = description.file_of(ref)
    known = getattr(_open_files, "last", None)
    if known is None or known[0] != file.key:
        close_files()
        reader = open_checked(file)
        _open_files.last = (file.key, reader)
    else:
        reader = known[1]
    return read_range(reader, file, description, ref.start, ref.stop)


def close_files() -> None:
    """Close the file that :func:`read_chunk` keeps open in this thread."""
    known = getattr(_open_files, "last", None)
    if known is not None:
        known[1].close()
        _open_files.last = None


def open_checked(file: SourceFile) -> Reader:
    """Open a file of a source, if it is still the same."""
    now = fingerprint(file.path)
    if now != file.fingerprint:
        msg = (
            f"{file.path}: the content must be the one that was opened (fingerprint "
            f"{file.fingerprint}); got {now}; open the events again"
        )
        raise InputError(msg)
    return open_reader(file.path, file.tree, file.layout)[0]


def read_range(
    reader: Reader,
    file: SourceFile,
    description: SourceDescription,
    start: int,
    stop: int,
) -> tuple[ak.Array, InputReport]:
    """Read a range of entries with an open reader.

    Parameters
    ----------
    reader : Reader
        Of the file.
    file : SourceFile
        Its description.
    description : SourceDescription
        The source.
    start, stop : int
        First entry, and the one after the last.

    Returns
    -------
    ak.Array
        Events.
    InputReport
        What became of every entry.

    Raises
    ------
    InputError
        In strict mode, if an entry is no event.
    """
    if not 0 <= start <= stop <= file.entries:
        msg = (
            f"{file.path}: entries 0 to {file.entries} can be read; got {start} to "
            f"{stop}"
        )
        raise InputError(msg)
    raw = reader.read(start, stop)
    to_electron_frame(raw, file.frame)
    rows = adjust_headers(raw.headers, file, description.samples)
    ids = identities(
        file.identity,
        raw.headers,
        start=start,
        sample_names=list(file.sample_names),
        fingerprint=file.fingerprint,
    )
    find_problems(raw, mass_tolerance=file.layout.mass_tolerance)
    _mark_duplicates(raw, ids, file, start)
    reasons = first_reason(raw.problems, len(raw))
    keep = reasons < 0
    report = _report(raw, reasons, file, start)
    if description.strict and report.n_rejected:
        msg = f"{file.path}: every entry must be an event in strict mode; got {report}"
        raise InputError(msg)
    samples = chunk_samples(raw, rows, file, description.samples, first=start == 0)
    events = assemble(
        raw,
        keep,
        ids=ids,
        rows=rows,
        samples=samples,
        optional=description.optional,
    )
    return events, report


def adjust_headers(
    headers: RawHeaders, file: SourceFile, samples: tuple[Sample, ...]
) -> NDArray[np.int16]:
    """Apply what is known of whole samples; return the row of every entry.

    A helicity or an energy that the file does not give comes from the sample.

    Parameters
    ----------
    headers : RawHeaders, length E
        Changed in place.
    file : SourceFile
        The file they are of.
    samples : tuple of Sample
        Samples of the source.

    Returns
    -------
    array of int16, shape (E,)
        Rows in ``samples``.

    Raises
    ------
    InputError
        If a stored row points nowhere.
    """
    table = np.array(file.rows, dtype=np.int16)
    if headers.sample is None:
        rows = np.full(len(headers), table[0], dtype=np.int16)
    else:
        inside = (headers.sample >= 0) & (headers.sample < len(table))
        if not inside.all():
            msg = (
                f"{file.path}: rows of samples from 0 to {len(table) - 1} are required; "
                f"got {headers.sample[~inside][0]}: damaged"
            )
            raise InputError(msg)
        rows = table[headers.sample]
    if file.unit_weights:
        headers.weight = np.ones(len(headers))
    helicity = np.array([s.helicity for s in samples], dtype=np.int8)[rows]
    headers.helicity = np.where(headers.helicity == 0, helicity, headers.helicity)
    sqrt_s = np.array([s.sqrt_s for s in samples])[rows]
    headers.sqrt_s = np.where(np.isnan(headers.sqrt_s), sqrt_s, headers.sqrt_s)
    return rows


def _mark_duplicates(
    raw: RawEvents, ids: NDArray[np.uint64], file: SourceFile, start: int
) -> None:
    """Mark entries whose identity came before in the source."""
    low, high = np.searchsorted(file.duplicates, (start, start + len(ids)))
    mask = np.zeros(len(ids), dtype=bool)
    mask[file.duplicates[low:high] - start] = True
    raw.mark(Reason.DUPLICATE, mask)


def _report(
    raw: RawEvents, reasons: NDArray[np.int8], file: SourceFile, start: int
) -> InputReport:
    """Count rejections and notes of a range."""
    rejected = {}
    for position, reason in enumerate(Reason):
        mask = reasons == position
        if mask.any():
            rejected[reason] = {file.path: Count.of(mask, start)}
    keep = reasons < 0
    noted = {}
    for note, mask in find_notes(raw).items():
        if (mask & keep).any():
            noted[note] = {file.path: Count.of(mask & keep, start)}
    return InputReport(len(raw), int(keep.sum()), rejected, noted)


def chunk_samples(
    raw: RawEvents,
    rows: NDArray[np.int16],
    file: SourceFile,
    samples: tuple[Sample, ...],
    *,
    first: bool,
) -> tuple[Sample, ...]:
    """Return the samples with entries and sums of weights of one range."""
    weight = np.where(np.isfinite(raw.headers.weight), raw.headers.weight, 0.0)
    entries = np.bincount(rows, minlength=len(samples))
    sums = np.bincount(rows, weight, minlength=len(samples))
    lost = file.lost if first else {}
    return tuple(
        sample.replace(
            entries=int(entries[row]) + lost.get(row, (0, 0.0))[0],
            sum_of_weights=float(sums[row]) + lost.get(row, (0, 0.0))[1],
        )
        for row, sample in enumerate(samples)
    )


class EventSource:
    """Events in files.

    Made by :func:`toprecon.io.open_events`.

    Parameters
    ----------
    description : SourceDescription
        Files and samples.
    """

    def __init__(self, description: SourceDescription) -> None:
        self.description = description
        self._report = InputReport(messages=description.messages)

    def __repr__(self) -> str:
        names = ", ".join(sample.name for sample in self.samples)
        return (
            f"EventSource({len(self.description.files)} files, {self.entries} entries, "
            f"samples: {names})"
        )

    @property
    def samples(self) -> tuple[Sample, ...]:
        """Samples, with entries and sums of weights over all files."""
        return self.description.samples

    @property
    def entries(self) -> int:
        """Entries of all files."""
        return sum(file.entries for file in self.description.files)

    @property
    def fingerprints(self) -> dict[str, str]:
        """Hash of the content of every file, by path."""
        return {file.path: file.fingerprint for file in self.description.files}

    @property
    def report(self) -> InputReport:
        """What became of the entries of the last pass, as far as it got."""
        return self._report

    def references(self, size: int = CHUNK) -> list[ChunkRef]:
        """Return references to all chunks.

        Parameters
        ----------
        size : int
            Entries per chunk, at most.

        Returns
        -------
        list of ChunkRef
            In the order of files and entries; none for a file without entries.

        Raises
        ------
        OptionError
            If the size is not positive.
        """
        if size < 1:
            msg = f"size: at least one entry per chunk is required; got {size}"
            raise OptionError(msg)
        return [
            ChunkRef(
                "+".join(file.sample_names),
                *file.key,
                start,
                min(start + size, file.entries),
            )
            for file in self.description.files
            for start in range(0, file.entries, size)
        ]

    def chunks(
        self, size: int = CHUNK, *, limit: int | None = None
    ) -> Iterator[ak.Array]:
        """Yield the events chunk by chunk.

        The memory is bounded by the chunk. Entries that are no events are counted in
        :attr:`report`, and a warning at the end says so.

        Parameters
        ----------
        size : int
            Entries per chunk, at most.
        limit : int, optional
            Stop after this many entries in all.

        Yields
        ------
        ak.Array
            Events; entries and sums of weights of their samples are those of the
            chunk.
        """
        self._report = InputReport(messages=self.description.messages)
        left = self.entries if limit is None else limit
        current: tuple[SourceFile, Reader] | None = None
        try:
            for ref in self.references(size):
                if left <= 0:
                    break
                file = self.description.file_of(ref)
                if current is None or current[0] is not file:
                    if current is not None:
                        current[1].close()
                    current = None
                    current = (file, open_checked(file))
                stop = min(ref.stop, ref.start + left)
                events, report = read_range(
                    current[1], file, self.description, ref.start, stop
                )
                left -= stop - ref.start
                self._report = self._report + report
                yield events
        finally:
            if current is not None:
                current[1].close()
        if self._report.n_rejected:
            warnings.warn(
                f"{self._report.n_rejected} of {self._report.entries} entries are no "
                f"events and were left out: {self._report}",
                SkippedEventsWarning,
                stacklevel=2,
            )

    def read(self, *, limit: int | None = None) -> ak.Array:
        """Return all events at once.

        Parameters
        ----------
        limit : int, optional
            Read only the first entries.

        Returns
        -------
        ak.Array
            Events; empty if the files are.
        """
        parts = list(self.chunks(limit=limit))
        if not parts:
            return self._no_events()
        totals = [part.attrs["samples"] for part in parts]
        samples = [
            sample.replace(
                entries=sum(rows[i]["entries"] for rows in totals),
                sum_of_weights=sum(rows[i]["sum_of_weights"] for rows in totals),
            )
            for i, sample in enumerate(self.samples)
        ]
        joined = parts[0] if len(parts) == 1 else ak.concatenate(parts)
        return with_samples(joined, samples)

    def _no_events(self) -> ak.Array:
        """Events without a row, with all fields."""
        from toprecon.io.raw import EXTRAS, RawObjects

        nothing = np.zeros(0)
        headers = RawHeaders(nothing, nothing.astype(np.int8), nothing)
        objects = {name: RawObjects.none(0, extra) for name, extra in EXTRAS.items()}
        return assemble(
            RawEvents(headers, objects, None, None, {}),
            nothing.astype(bool),
            ids=nothing.astype(np.uint64),
            rows=nothing.astype(np.int16),
            samples=self.samples,
            optional=self.description.optional,
        )
