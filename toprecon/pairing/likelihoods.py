"""Calibrated likelihood ratios of single jets: b score and b-jet charge."""

from __future__ import annotations

from typing import Self

import awkward as ak
import numpy as np
from numpy.typing import NDArray
from pydantic import model_validator

from toprecon.events import require_fields
from toprecon.options import Options, option

FloatArray = NDArray[np.float64]


class ChargeLikelihood(Options):
    """Log likelihood ratio of anti-b over b, linear in the charges of the jet.

    It is odd in the charges, as charge conjugation asks for. The defaults count both
    charges equally; :func:`~toprecon.pairing.calibrate` fits them.
    """

    vertex: float = option(1.0, "weight of the vertex charge")
    track: float = option(1.0, "weight of the track charge")

    def log_ratio(self, vertex: FloatArray, track: FloatArray) -> FloatArray:
        """Return ln(P(charges | anti-b) / P(charges | b)); a missing charge is 0."""
        result: FloatArray = self.vertex * np.nan_to_num(vertex)
        return result + self.track * np.nan_to_num(track)


class TagLikelihood(Options):
    """Log likelihood ratio of b over other jets in bins of the b score."""

    edges: tuple[float, ...] = option((), "inner bin edges of the b score, increasing")
    log_ratio: tuple[float, ...] = option(
        (0.0,), "ln(P(score | b) / P(score | not b)) per bin"
    )

    @model_validator(mode="after")
    def _fitting(self) -> Self:
        rising = all(a < b for a, b in zip(self.edges, self.edges[1:], strict=False))
        if not rising or len(self.log_ratio) != len(self.edges) + 1:
            msg = (
                "edges must increase and log_ratio have one value more; got "
                f"edges={self.edges}, log_ratio={self.log_ratio}"
            )
            raise ValueError(msg)
        return self

    def of(self, btag: FloatArray) -> FloatArray:
        """Return the log ratio of jets of any shape; 0 for a missing score."""
        bins = np.searchsorted(np.array(self.edges), np.nan_to_num(btag), side="right")
        return np.where(np.isfinite(btag), np.array(self.log_ratio)[bins], 0.0)


def charges_of(events: ak.Array) -> tuple[FloatArray, FloatArray]:
    """Return vertex and track charge of all jets, flat."""
    require_fields(events.jets, ("vertex_charge", "track_charge"), where="events.jets")
    flat = ak.flatten(events.jets, axis=1)
    vertex = ak.to_numpy(flat.vertex_charge).astype(np.float64)
    return vertex, ak.to_numpy(flat.track_charge).astype(np.float64)


def fit_charge(vertex: FloatArray, track: FloatArray) -> ChargeLikelihood:
    """Fit the weights by logistic regression.

    Parameters
    ----------
    vertex, track : array, shape (N,)
        Charges of anti-b jets, and of b jets with all signs turned.

    Returns
    -------
    ChargeLikelihood
        With the weights of the greatest likelihood.

    References
    ----------
    D. R. Cox, J. R. Stat. Soc. B 20 (1958) 215 (logistic regression).
    """
    x = np.stack([np.nan_to_num(vertex), np.nan_to_num(track)])
    weights = np.zeros(2)
    for _ in range(25):  # Newton steps; the problem is convex
        wrong = 1.0 / (1.0 + np.exp(weights @ x))
        # the weak pull to 0 keeps the weights finite if the charges separate fully
        slope = x @ wrong / x.shape[1] - 1e-4 * weights
        curvature = (x * wrong * (1 - wrong)) @ x.T / x.shape[1] + 1e-4 * np.eye(2)
        weights = weights + np.linalg.solve(curvature, slope)
    return ChargeLikelihood(vertex=float(weights[0]), track=float(weights[1]))


def fit_tag(btag: FloatArray, is_b: NDArray[np.bool_], n_bins: int) -> TagLikelihood:
    """Fill the table of b scores in bins that hold equally many b jets.

    Parameters
    ----------
    btag : array, shape (N,)
        b scores.
    is_b : array of bool, shape (N,)
        Whether the jet is a true b jet.
    n_bins : int
        Bins at most.

    Returns
    -------
    TagLikelihood
        Half an event is added to every bin.
    """
    finite = np.isfinite(btag)
    btag, is_b = btag[finite], is_b[finite]
    inner = np.linspace(0, 1, n_bins + 1)[1:-1]
    edges = np.unique(np.quantile(btag[is_b], inner))
    bins = np.searchsorted(edges, btag, side="right")
    shares = []
    for which in (is_b, ~is_b):
        counts = np.bincount(bins[which], minlength=len(edges) + 1) + 0.5
        shares.append(counts / counts.sum())
    ratio = np.log(shares[0] / shares[1])
    return TagLikelihood(edges=tuple(edges.tolist()), log_ratio=tuple(ratio.tolist()))
