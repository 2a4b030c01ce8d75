"""The matrix in the open JSON serialisation of histograms (UHI)."""

from __future__ import annotations

import json
import os
from pathlib import Path

import numpy as np

from toprecon.errors import InputError, StudyError
from toprecon.migration.histograms import from_values, to_histograms
from toprecon.migration.matrix import MigrationMatrix


def write_histogram_json(matrix: MigrationMatrix, path: str | os.PathLike[str]) -> Path:
    """Write the matrix as a JSON object of histograms.

    Parameters
    ----------
    matrix : MigrationMatrix
        The matrix; replicas are not included.
    path : path
        File to write; replaced if it exists.

    Returns
    -------
    Path
        The file written: one histogram of the UHI schema per array, by name.
    """
    import uhi.io.json
    from boost_histogram.serialization import to_uhi

    data = {name: to_uhi(h) for name, h in to_histograms(matrix).items()}
    target = Path(path)
    partial = target.with_name(f".{target.name}.{os.getpid()}.part")
    text = json.dumps(data, default=uhi.io.json.default, sort_keys=True)
    try:
        partial.write_text(text + "\n", encoding="utf-8")
        partial.replace(target)
    finally:
        partial.unlink(missing_ok=True)
    return target


def read_histogram_json(path: str | os.PathLike[str]) -> MigrationMatrix:
    """Read a matrix written by :func:`write_histogram_json`.

    Parameters
    ----------
    path : path
        JSON file.

    Returns
    -------
    MigrationMatrix
        The same, bit for bit, without replicas.

    Raises
    ------
    InputError
        If the file is missing, damaged or something else.
    """
    try:
        data = json.loads(Path(path).read_text(encoding="utf-8"))
        axes = data["counts"]["axes"]
        return from_values(
            lambda name: (
                np.asarray(data[name]["storage"]["values"]),
                np.asarray(data[name]["storage"]["variances"]),
            ),
            axes[0]["edges"],
            axes[1]["edges"],
        )
    except (OSError, ValueError, LookupError, TypeError, StudyError) as error:
        msg = f"{path}: a migration matrix (JSON) is required, but it cannot be read"
        raise InputError(msg) from error
