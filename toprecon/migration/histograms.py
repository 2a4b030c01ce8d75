"""The matrix as histograms with sums of squared weights."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from hist import Hist
from hist.axis import Variable
from hist.storage import Weight

from toprecon.events import Binning
from toprecon.migration.matrix import ARRAYS, MigrationMatrix

AXES = {
    "counts": ("cos_theta_true", "cos_theta_reco"),
    "generated": ("cos_theta_true",),
    "missed": ("cos_theta_true",),
    "from_outside": ("cos_theta_reco",),
    "background": ("cos_theta_reco",),
}


def to_histograms(matrix: MigrationMatrix) -> dict[str, Any]:
    """Return one histogram per array, with variances.

    Parameters
    ----------
    matrix : MigrationMatrix
        The matrix; replicas are not included.

    Returns
    -------
    dict of hist.Hist
        By the names of the arrays.
    """
    edges = {
        "cos_theta_true": matrix.true_binning.array,
        "cos_theta_reco": matrix.reco_binning.array,
    }
    out = {}
    for name in ARRAYS:
        axes = [
            Variable(edges[a], name=a, label=a, underflow=False, overflow=False)
            for a in AXES[name]
        ]
        histogram = Hist(*axes, storage=Weight(), name=name)
        view = histogram.view()
        view.value = getattr(matrix, name)
        view.variance = getattr(matrix, f"{name}_variances")
        out[name] = histogram
    return out


def from_values(
    get: Callable[[str], tuple[np.ndarray, np.ndarray]],
    true_edges: Any,
    reco_edges: Any,
    replicas: Any = None,
) -> MigrationMatrix:
    """Return the matrix from values and variances by name."""
    true, reco = Binning(tuple(true_edges)), Binning(tuple(reco_edges))
    arrays = {}
    for name in ARRAYS:
        values, variances = get(name)
        arrays[name] = np.asarray(values, dtype=np.float64)
        arrays[f"{name}_variances"] = np.asarray(variances, dtype=np.float64)
    if replicas is None:
        replicas = np.zeros((0, len(true) + 2, len(reco) + 1))
    return MigrationMatrix(true, reco, **arrays, replicas=np.asarray(replicas))
