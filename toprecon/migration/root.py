"""The matrix as ROOT histograms."""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np
import uproot

from toprecon.errors import InputError, StudyError
from toprecon.migration.histograms import from_values, to_histograms
from toprecon.migration.matrix import MigrationMatrix


def write_root(matrix: MigrationMatrix, path: str | os.PathLike[str]) -> Path:
    """Write the matrix as histograms with sums of squared weights.

    Parameters
    ----------
    matrix : MigrationMatrix
        The matrix.
    path : path
        File to write; replaced if it exists. It appears only when complete.

    Returns
    -------
    Path
        The file written: a two-dimensional histogram ``counts`` (x generated, y
        reconstructed), one-dimensional ones named as the arrays of the matrix, and
        ``replica_<n>`` blocks if there are replicas.
    """
    target = Path(path)
    partial = target.with_name(f".{target.name}.{os.getpid()}.part")
    try:
        with uproot.recreate(partial) as file:
            for name, histogram in to_histograms(matrix).items():
                file[name] = histogram
            for index, block in enumerate(matrix.replicas):
                edges = [np.arange(n + 1, dtype=np.float64) for n in block.shape]
                file[f"replica_{index}"] = (block, *edges)
        partial.replace(target)
    finally:
        partial.unlink(missing_ok=True)
    return target


def read_root(path: str | os.PathLike[str]) -> MigrationMatrix:
    """Read a matrix written by :func:`write_root`.

    Parameters
    ----------
    path : path
        ROOT file.

    Returns
    -------
    MigrationMatrix
        The same, bit for bit.

    Raises
    ------
    InputError
        If the file is missing, damaged or something else.
    """
    try:
        with uproot.open(path) as file:
            _check_complete(path, file.file.fEND)
            names = set(file.keys(cycle=False))
            n = sum(name.startswith("replica_") for name in names)
            blocks = [file[f"replica_{i}"].values() for i in range(n)]
            return from_values(
                lambda name: (file[name].values(), file[name].variances()),
                file["counts"].axis(0).edges(),
                file["counts"].axis(1).edges(),
                np.stack(blocks) if blocks else None,
            )
    except (
        OSError,
        ValueError,
        LookupError,
        AttributeError,
        EOFError,
        StudyError,
    ) as error:
        msg = f"{path}: a migration matrix (ROOT) is required, but it cannot be read"
        raise InputError(msg) from error


def _check_complete(path: str | os.PathLike[str], size: int) -> None:
    """Refuse a file that is shorter than its header says."""
    if Path(path).stat().st_size < size:
        raise EOFError
