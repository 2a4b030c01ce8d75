"""Descriptions of sources and references to chunks, as plain data.

A source is a plain description (files, layouts, samples, identities); a chunk is a
plain reference into it. Reading a chunk needs nothing else, so the same chunk is the
same events in any process.
"""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError
from toprecon.events import Sample
from toprecon.io.beams import BeamFrame
from toprecon.io.identity import Identity
from toprecon.io.layout import FileLayout


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
