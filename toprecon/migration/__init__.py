"""Migration: generated against reconstructed angle, for whoever unfolds.

*Takes* rows of the event table with weights. *Gives* a :class:`MigrationMatrix` with
all that belongs to it, files of it in open formats, and tests of how well a spectrum
can be corrected with it.
"""

from __future__ import annotations

from toprecon.migration.closure import (
    ClosureResult,
    accumulate_halves,
    check_closure,
)
from toprecon.migration.hepdata import write_hepdata
from toprecon.migration.histogram_json import read_histogram_json, write_histogram_json
from toprecon.migration.influence import simulation_covariance
from toprecon.migration.linearity import LinearityResult, check_linearity
from toprecon.migration.matrix import MigrationMatrix, accumulate, accumulate_half
from toprecon.migration.npz import read_npz, write_npz
from toprecon.migration.options import MigrationOptions
from toprecon.migration.root import read_root, write_root
from toprecon.migration.unfolding import Method, Unfolded, UnfoldingOptions, unfold

__all__ = [
    "ClosureResult",
    "LinearityResult",
    "Method",
    "MigrationMatrix",
    "MigrationOptions",
    "Unfolded",
    "UnfoldingOptions",
    "accumulate",
    "accumulate_half",
    "accumulate_halves",
    "check_closure",
    "check_linearity",
    "read_histogram_json",
    "read_npz",
    "read_root",
    "simulation_covariance",
    "unfold",
    "write_hepdata",
    "write_histogram_json",
    "write_npz",
    "write_root",
]
