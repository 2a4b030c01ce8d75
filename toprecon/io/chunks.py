"""Reading one chunk: raw entries, checks, identities, Events."""

from __future__ import annotations

import threading

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError
from toprecon.events import Sample
from toprecon.io.assembly import assemble
from toprecon.io.beams import complete_missing, to_electron_frame
from toprecon.io.checks import find_notes, find_problems, first_reason
from toprecon.io.formats import open_reader
from toprecon.io.identity import fingerprint, identities
from toprecon.io.raw import RawEvents, RawHeaders, Reader, Reason
from toprecon.io.references import ChunkRef, SourceDescription, SourceFile
from toprecon.io.report import Count, InputReport

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
    complete_missing(raw)
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
