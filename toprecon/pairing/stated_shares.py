"""Whether stated probabilities hold: reliability curve, and charge purity from data."""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import ArrayLike, NDArray

from toprecon.errors import OptionError

FloatArray = NDArray[np.float64]


@dataclasses.dataclass(frozen=True)
class Reliability:
    """Stated share against fraction right, in bins of the stated share.

    Parameters
    ----------
    edges : array, shape (B + 1,)
        Bin edges.
    stated, fraction, error : array, shape (B,)
        Mean stated share, weighted fraction right and its error; NaN in empty bins.
    weight : array, shape (B,)
        Sum of the weights.
    """

    edges: FloatArray
    stated: FloatArray
    fraction: FloatArray
    error: FloatArray
    weight: FloatArray


def reliability(
    share: ArrayLike,
    right: ArrayLike,
    weight: ArrayLike | None = None,
    *,
    edges: ArrayLike | None = None,
) -> Reliability:
    """Compare stated shares with how often they are right.

    Parameters
    ----------
    share : array, shape (E,)
        Stated probability; events without one (NaN) are left out.
    right : array of bool, shape (E,)
        Whether the choice is right.
    weight : array, shape (E,), optional
        Weights.
    edges : array, optional
        Bin edges, ten bins in [0, 1] if absent; the last one includes its upper edge.

    Returns
    -------
    Reliability
        The error is the binomial one for the effective number of events.
    """
    edge = np.linspace(0, 1, 11) if edges is None else np.asarray(edges, float)
    value, good = np.asarray(share, float), np.asarray(right, bool)
    w = np.ones(len(value)) if weight is None else np.asarray(weight, float)
    keep = (value >= edge[0]) & (value <= edge[-1])
    value, good, w = value[keep], good[keep], w[keep]
    n = len(edge) - 1
    index = np.minimum(np.searchsorted(edge, value, side="right") - 1, n - 1)

    def sums(values: FloatArray) -> FloatArray:
        return np.bincount(index, weights=values, minlength=n).astype(np.float64)

    total, stated, rights = sums(w), sums(w * value), sums(w * good)
    with np.errstate(invalid="ignore", divide="ignore"):
        fraction = rights / total
        error = np.sqrt(fraction * (1 - fraction) * sums(w * w)) / total
        return Reliability(edge, stated / total, fraction, error, total)


@dataclasses.dataclass(frozen=True)
class ChargePurity:
    """How often the charge of one jet is right, from double tags.

    Parameters
    ----------
    purity, purity_error : float
        Probability p that the charge of one jet is right.
    wrong, wrong_error : float
        Share of opposite-sign pairs with both charges wrong.
    """

    purity: float
    purity_error: float
    wrong: float
    wrong_error: float


def charge_purity(n_opposite: float, n_same: float) -> ChargePurity:
    """Return the charge purity from the numbers of opposite- and same-sign pairs.

    Parameters
    ----------
    n_opposite, n_same : float
        Pairs of a b and an anti-b jet whose measured charges differ or agree.

    Returns
    -------
    ChargePurity
        From r = N_opposite/N = p^2 + (1-p)^2: p = (1 + sqrt(2r - 1))/2. The two jets
        must be independent and equally good.

    Raises
    ------
    OptionError
        If there are no more opposite- than same-sign pairs.
    """
    if not (n_opposite > n_same >= 0):
        msg = (
            "charge_purity: more opposite- than same-sign pairs are required; got "
            f"{n_opposite:g} and {n_same:g}; below one half no purity can be found"
        )
        raise OptionError(msg)
    n = n_opposite + n_same
    r = n_opposite / n
    root = np.sqrt(2 * r - 1)
    p, q = 0.5 * (1 + root), 0.5 * (1 - root)
    r_error = np.sqrt(r * (1 - r) / n)
    p_error = r_error / (2 * root)
    # w = q^2/(p^2 + q^2): dw/dp = -2 p q/(p^2 + q^2)^2
    w_error = 2 * p * q / r**2 * p_error
    return ChargePurity(float(p), float(p_error), float(q * q / r), float(w_error))
