"""Migration: generated against reconstructed angle, for whoever unfolds.

*Takes* rows of the event table with weights. *Gives* a :class:`MigrationMatrix` with
all that belongs to it, and files of it in open formats.
"""

from __future__ import annotations

from toprecon.migration.hepdata import write_hepdata
from toprecon.migration.histogram_json import read_histogram_json, write_histogram_json
from toprecon.migration.matrix import MigrationMatrix, accumulate
from toprecon.migration.npz import read_npz, write_npz
from toprecon.migration.options import MigrationOptions
from toprecon.migration.root import read_root, write_root

__all__ = [
    "MigrationMatrix",
    "MigrationOptions",
    "accumulate",
    "read_histogram_json",
    "read_npz",
    "read_root",
    "write_hepdata",
    "write_histogram_json",
    "write_npz",
    "write_root",
]
