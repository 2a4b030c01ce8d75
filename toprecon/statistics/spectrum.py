"""Asymmetry of a binned spectrum whose bins may be correlated."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import StudyError
from toprecon.statistics.linear import Estimate, ratio
from toprecon.statistics.measured import Measured


def hemispheres(edges: Any) -> NDArray[np.float64]:
    """Return +1 for bins above zero and -1 for bins below.

    Parameters
    ----------
    edges : array, shape (B + 1,)
        Edges of the bins of cos(theta).

    Returns
    -------
    array, shape (B,)
        Signs.

    Raises
    ------
    StudyError
        If a bin has values of both signs.
    """
    edges = np.asarray(edges, dtype=np.float64)
    if np.any((edges[:-1] < 0) & (edges[1:] > 0)):
        msg = (
            "asymmetry of a spectrum: 0 must be an edge of the bins of cos(theta); got "
            f"{edges.tolist()}"
        )
        raise StudyError(msg)
    return np.where(edges[:-1] >= 0, 1.0, -1.0)


def asymmetry_of_spectrum(values: Any, edges: Any) -> Estimate:
    """Return A_FB of a spectrum with its derivatives by the contents of the bins.

    Parameters
    ----------
    values : array, shape (B,)
        Contents.
    edges : array, shape (B + 1,)
        Edges of the bins of cos(theta); 0 must be one of them, or outside.

    Returns
    -------
    Estimate
        NaN for an empty spectrum.
    """
    x = np.asarray(values, dtype=np.float64)
    return ratio(hemispheres(edges), np.ones(len(x)), x)


def asymmetry_from_spectrum(values: Any, covariance: Any, edges: Any) -> Measured:
    """Return A_FB of a spectrum with its error.

    Parameters
    ----------
    values : array, shape (B,)
        Contents.
    covariance : array, shape (B,) or (B, B)
        Variances of independent bins, or the covariance.
    edges : array, shape (B + 1,)
        Edges of the bins of cos(theta); 0 must be one of them, or outside.

    Returns
    -------
    Measured
        NaN for an empty spectrum.
    """
    c = np.asarray(covariance, dtype=np.float64)
    matrix = np.diag(c) if c.ndim == 1 else c
    return asymmetry_of_spectrum(values, edges).measured(matrix)
