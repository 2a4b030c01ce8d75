"""Events in files, read chunk by chunk."""

from __future__ import annotations

import warnings
from collections.abc import Iterator

import awkward as ak
import numpy as np

from toprecon.errors import OptionError, SkippedEventsWarning
from toprecon.events import Sample, with_samples
from toprecon.io.assembly import assemble
from toprecon.io.chunks import open_checked, read_range
from toprecon.io.raw import EXTRAS, RawEvents, RawHeaders, RawObjects, Reader
from toprecon.io.references import ChunkRef, SourceDescription, SourceFile
from toprecon.io.report import InputReport

CHUNK = 50_000
"""Events per chunk: fast, and the memory stays below some 100 MB."""


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
