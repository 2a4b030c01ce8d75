"""The matrix as a numpy archive."""

from __future__ import annotations

import os
import zipfile
from pathlib import Path

import numpy as np

from toprecon.errors import InputError, StudyError
from toprecon.events import Binning
from toprecon.migration.matrix import MigrationMatrix

_UNREADABLE = (
    OSError,
    ValueError,
    KeyError,
    TypeError,
    StudyError,
    EOFError,
    zipfile.BadZipFile,
)


def write_npz(matrix: MigrationMatrix, path: str | os.PathLike[str]) -> Path:
    """Write the matrix to a numpy archive, complete or not at all.

    Parameters
    ----------
    matrix : MigrationMatrix
        The matrix.
    path : path
        File to write; replaced if it exists.

    Returns
    -------
    Path
        The file written.
    """
    target = Path(path)
    partial = target.with_name(f".{target.name}.{os.getpid()}.part.npz")
    try:
        np.savez(
            partial,
            true_edges=matrix.true_binning.array,
            reco_edges=matrix.reco_binning.array,
            **matrix.arrays,  # type: ignore[arg-type]
        )
        partial.replace(target)
    finally:
        partial.unlink(missing_ok=True)
    return target


def read_npz(path: str | os.PathLike[str]) -> MigrationMatrix:
    """Read a matrix written by :func:`write_npz`.

    Parameters
    ----------
    path : path
        Numpy archive.

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
        with Path(path).open("rb") as file, np.load(file) as archive:
            arrays = dict(archive)
        true = Binning(tuple(arrays.pop("true_edges")))
        reco = Binning(tuple(arrays.pop("reco_edges")))
        return MigrationMatrix(true, reco, **arrays)
    except _UNREADABLE as error:
        msg = f"{path}: a migration matrix (NPZ) is required, but it cannot be read"
        raise InputError(msg) from error
