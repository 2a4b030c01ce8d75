"""The matrix as tables ready for a HEPData submission.

The tables are YAML written as JSON, which is YAML too. Format: HEPData submission
documentation, JSON schema 1.1.1 (independent variables as low/high, errors as
symerror; tables without any error leave them out).
"""

from __future__ import annotations

import json
import os
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import StudyError
from toprecon.events import Binning
from toprecon.migration.matrix import MigrationMatrix

TRUE_HEADER = "COS(THETA) GENERATED"
RECO_HEADER = "COS(THETA) RECONSTRUCTED"


def write_hepdata(
    matrix: MigrationMatrix,
    folder: str | os.PathLike[str],
    *,
    sqrt_s: float | None = None,
    comment: str = "",
) -> Path:
    """Write the tables of a submission.

    Parameters
    ----------
    matrix : MigrationMatrix
        The matrix.
    folder : path
        Folder to make; it must not exist.
    sqrt_s : float, optional
        Collision energy [GeV], for the keywords.
    comment : str
        Text of the submission, such as the cautions.

    Returns
    -------
    Path
        The folder: ``submission.yaml`` and one file per table.

    Raises
    ------
    StudyError
        If the folder exists.
    """
    target = Path(folder)
    if target.exists():
        msg = f"{target}: a new folder is required, but this exists; choose another"
        raise StudyError(msg)
    target.mkdir(parents=True)
    documents: list[dict[str, Any]] = [{"comment": comment or "Migration matrix"}]
    for name, description, data in _tables(matrix):
        file = f"{name.lower().replace(' ', '_')}.yaml"
        (target / file).write_text(json.dumps(data, indent=1) + "\n", encoding="utf-8")
        documents.append(_entry(name, description, file, sqrt_s))
    text = "\n---\n".join(json.dumps(document, indent=1) for document in documents)
    (target / "submission.yaml").write_text(text + "\n", encoding="utf-8")
    return target


def _entry(
    name: str, description: str, file: str, sqrt_s: float | None
) -> dict[str, Any]:
    """Entry of one table in the submission."""
    keywords: list[dict[str, Any]] = [
        {"name": "reactions", "values": ["E+ E- --> TOP TOPBAR"]},
        {"name": "observables", "values": ["ASYM"]},
    ]
    if sqrt_s is not None:
        keywords.append({"name": "cmenergies", "values": [sqrt_s]})
    return {
        "name": name,
        "description": description,
        "keywords": keywords,
        "data_file": file,
    }


def _tables(matrix: MigrationMatrix) -> Iterator[tuple[str, str, dict[str, Any]]]:
    """Name, description and content of every table."""
    true, reco = matrix.true_binning, matrix.reco_binning
    both = [(TRUE_HEADER, true, 0), (RECO_HEADER, reco, 1)]
    response_errors = np.sqrt(
        np.array(
            [np.diagonal(matrix.response_covariance(t)) for t in range(len(true))]
        ).clip(min=0)
    )
    yield (
        "Counts",
        "Selected signal events by generated and reconstructed bin.",
        _table(both, "EVENTS", matrix.counts, np.sqrt(matrix.counts_variances)),
    )
    yield (
        "Response",
        "Probability of a reconstructed bin given the generated one.",
        _table(both, "PROBABILITY", matrix.response, response_errors),
    )
    for name, title, text, axis in (
        ("generated", "Generated", "Signal events generated.", (TRUE_HEADER, true, 0)),
        ("missed", "Missed", "Signal not selected.", (TRUE_HEADER, true, 0)),
        (
            "from_outside",
            "From outside",
            "Signal process outside the truth phase space, selected.",
            (RECO_HEADER, reco, 0),
        ),
        ("background", "Background", "Other processes.", (RECO_HEADER, reco, 0)),
    ):
        errors = np.sqrt(getattr(matrix, f"{name}_variances"))
        yield title, text, _table([axis], "EVENTS", getattr(matrix, name), errors)
    yield (
        "Efficiency",
        "Share of the generated signal that is selected.",
        _table(
            [(TRUE_HEADER, true, 0)],
            "EFFICIENCY",
            matrix.efficiency,
            matrix.efficiency_error,
        ),
    )


def _table(
    axes: list[tuple[str, Binning, int]],
    header: str,
    values: NDArray[np.float64],
    errors: NDArray[np.float64],
) -> dict[str, Any]:
    """One table; one row per cell."""
    index = np.indices(values.shape).reshape(values.ndim, -1)
    independent = [
        {
            "header": {"name": name},
            "values": [
                {"low": binning.edges[i], "high": binning.edges[i + 1]}
                for i in index[dimension]
            ],
        }
        for name, binning, dimension in axes
    ]
    cells = [
        _cell(value, error)
        for value, error in zip(values.ravel(), errors.ravel(), strict=True)
    ]
    return {
        "independent_variables": independent,
        "dependent_variables": [{"header": {"name": header}, "values": cells}],
    }


def _cell(value: float, error: float) -> dict[str, Any]:
    """One value; a missing bin is "-", and an error of 0 is left out."""
    if not np.isfinite(value):
        return {"value": "-"}
    if not np.isfinite(error) or error == 0:
        return {"value": float(value)}
    return {
        "value": float(value),
        "errors": [{"symerror": float(error), "label": "simulated sample"}],
    }
