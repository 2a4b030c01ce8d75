"""The top tag: cuts or a calibrated likelihood ratio; efficiency and mistag."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from toprecon.boosted.options import (
    FeatureTable,
    TagLikelihood,
    TagMethod,
    TagOptions,
)
from toprecon.errors import InputError, MissingFieldError, nearest

FloatArray = NDArray[np.float64]

LIKELIHOOD_FEATURES = (
    "groomed_mass",
    "w_mass",
    "tau_32",
    "tau_21",
    "sqrt_d23",
    "d2",
    "w_helicity",
)
"""Observables of the likelihood ratio unless others are named."""


def passes_tag(values: Mapping[str, FloatArray], options: TagOptions) -> NDArray[Any]:
    """Return which fat jets are tagged.

    Parameters
    ----------
    values : mapping of array, shape (F,)
        Substructure by name.
    options : TagOptions
        Cuts, or the likelihood ratio and its least probability.

    Returns
    -------
    array of bool, shape (F,)
        NaN fails; limits are inclusive below and exclusive above.
    """
    if options.method is TagMethod.LIKELIHOOD:
        with np.errstate(invalid="ignore"):
            return tag_score(values, options.likelihood) >= options.score_low
    mass, w_mass = values["groomed_mass"], values["w_mass"]
    with np.errstate(invalid="ignore"):
        return (
            (mass >= options.mass_low)
            & (mass < options.mass_high)
            & (w_mass >= options.w_mass_low)
            & (w_mass < options.w_mass_high)
            & (values["energy_share"] >= options.energy_share_low)
            & (values["tau_32"] <= options.tau_32_high)
            & (values["w_helicity"] <= options.w_helicity_high)
        )


def tag_score(
    values: Mapping[str, FloatArray], likelihood: TagLikelihood
) -> FloatArray:
    """Probability that a fat jet is a top, for equal numbers of both kinds.

    Parameters
    ----------
    values : mapping of array, shape (F,)
        Substructure by name.
    likelihood : TagLikelihood
        Tables; empty ones give NaN.

    Returns
    -------
    array, shape (F,)
        In [0, 1]; NaN where an observable is NaN.

    Raises
    ------
    MissingFieldError
        If an observable of the tables is not among the values.
    """
    if not likelihood.features:
        return np.full(len(next(iter(values.values()))), np.nan)
    total: Any = 0.0
    for table in likelihood.features:
        if table.name not in values:
            msg = (
                f"tag.likelihood: unknown observable {table.name!r}"
                f"{nearest(table.name, values)}"
            )
            raise MissingFieldError(msg)
        total = total + table.weight * _log_ratio(values[table.name], table)
    score = total + likelihood.offset
    return 1.0 / (1.0 + np.exp(-np.clip(score, -500, 500)))


def _log_ratio(values: FloatArray, table: FeatureTable) -> FloatArray:
    """Look the values up in a table; NaN stays NaN."""
    ratios = np.asarray(table.log_ratio)
    index = np.searchsorted(np.asarray(table.edges), values, side="right")
    return np.where(
        np.isnan(values), np.nan, ratios[np.minimum(index, len(ratios) - 1)]
    )


def calibrate_tag(
    signal: Mapping[str, ArrayLike],
    background: Mapping[str, ArrayLike],
    *,
    features: tuple[str, ...] = LIKELIHOOD_FEATURES,
    n_bins: int = 12,
) -> TagLikelihood:
    """Make the tables of the likelihood ratio from fat jets of known origin.

    Densities are counted in bins that hold equal numbers of signal and background
    together. Since the observables are correlated, the log ratios are then weighted by
    logistic regression, which also makes the score a probability.

    Parameters
    ----------
    signal, background : mapping of array, shape (F,)
        Substructure by name, of tops and of other fat jets.
    features : tuple of str
        Observables used.
    n_bins : int
        Bins per observable.

    Returns
    -------
    TagLikelihood
        For ``TagOptions(likelihood=...)``.

    Raises
    ------
    InputError
        If there are fewer than ten fat jets per bin of either kind.

    References
    ----------
    J. Neyman, E. S. Pearson, Phil. Trans. R. Soc. A 231 (1933) 289 (likelihood ratio);
    D. R. Cox, J. R. Stat. Soc. B 20 (1958) 215 (logistic regression).
    """
    sets = [
        {name: np.asarray(kind[name], dtype=np.float64) for name in features}
        for kind in (signal, background)
    ]
    for label, kind in zip(("signal", "background"), sets, strict=True):
        known = np.isfinite(np.stack(list(kind.values()))).all(axis=0)
        for name in features:
            kind[name] = kind[name][known]
        if int(known.sum()) < 10 * n_bins:
            msg = (
                f"calibrate_tag: at least {10 * n_bins} {label} fat jets are required "
                f"for {n_bins} bins; got {int(known.sum())}; use fewer bins"
            )
            raise InputError(msg)
    tables = tuple(
        _table(name, sets[0][name], sets[1][name], n_bins) for name in features
    )
    ratios = [
        np.stack([_log_ratio(kind[table.name], table) for table in tables])
        for kind in sets
    ]
    weights, offset = _logistic(ratios[0], ratios[1])
    weighted = tuple(
        table.replace(weight=float(w)) for table, w in zip(tables, weights, strict=True)
    )
    return TagLikelihood(features=weighted, offset=offset)


def _table(
    name: str, signal: FloatArray, background: FloatArray, n_bins: int
) -> FeatureTable:
    """Log ratio of the densities in bins; one count is added to each."""
    share = np.linspace(0, 1, n_bins + 1)[1:-1]
    both = np.concatenate([signal, background])
    sizes = np.array([len(signal), len(background)])
    edges = np.unique(
        np.quantile(
            both, share, weights=np.repeat(1.0 / sizes, sizes), method="inverted_cdf"
        )
    )
    counts = [
        np.bincount(np.searchsorted(edges, x, side="right"), minlength=len(edges) + 1)
        + 1.0
        for x in (signal, background)
    ]
    ratio = np.log(counts[0] / counts[0].sum()) - np.log(counts[1] / counts[1].sum())
    return FeatureTable(
        name=name,
        edges=tuple(float(x) for x in edges),
        log_ratio=tuple(float(x) for x in ratio),
    )


def _logistic(signal: FloatArray, background: FloatArray) -> tuple[FloatArray, float]:
    """Weights of features (K, F) and offset, with equal weight of both kinds."""
    from scipy.optimize import minimize

    n = len(signal)

    def loss(parameters: FloatArray) -> tuple[float, FloatArray]:
        total, slope = 0.0, np.zeros(n + 1)
        for features, sign in ((signal, 1.0), (background, -1.0)):
            score = sign * (parameters[:n] @ features + parameters[n])
            total += float(np.logaddexp(0.0, -score).mean())
            pull = -sign / (1.0 + np.exp(np.clip(score, -50, 50))) / features.shape[1]
            slope += np.concatenate([features @ pull, [pull.sum()]])
        return total, slope

    start = np.concatenate([np.full(n, 1.0 / n), [0.0]])
    found = minimize(loss, start, jac=True, method="BFGS").x
    return found[:n], float(found[n])


@dataclasses.dataclass(frozen=True)
class Roc:
    """Efficiency against mistag rate for a falling threshold.

    Parameters
    ----------
    threshold : array, shape (T,)
        Least score that is tagged, falling.
    efficiency, mistag : array, shape (T,)
        Share of signal and of background fat jets at or above it.
    """

    threshold: FloatArray
    efficiency: FloatArray
    mistag: FloatArray

    @property
    def area(self) -> float:
        """Area under efficiency against mistag: 1 separates fully, 0.5 is chance."""
        x = np.concatenate([[0.0], self.mistag, [1.0]])
        y = np.concatenate([[0.0], self.efficiency, [1.0]])
        return float(np.sum(np.diff(x) * 0.5 * (y[1:] + y[:-1])))

    def mistag_at(self, efficiency: float) -> float:
        """Mistag rate at an efficiency, interpolated."""
        return float(np.interp(efficiency, self.efficiency, self.mistag))


def roc(
    signal: ArrayLike,
    background: ArrayLike,
    *,
    signal_weight: ArrayLike | None = None,
    background_weight: ArrayLike | None = None,
) -> Roc:
    """Efficiency and mistag rate at every threshold of a score.

    Parameters
    ----------
    signal, background : array, shape (F,)
        Scores, larger for tops; NaN is never tagged but counts as a fat jet.
    signal_weight, background_weight : array, shape (F,), optional
        Weights; 1 without.

    Returns
    -------
    Roc
        One point per distinct finite score.
    """
    kinds = []
    for score, weight in ((signal, signal_weight), (background, background_weight)):
        x = np.asarray(score, dtype=np.float64)
        w = np.ones(len(x)) if weight is None else np.asarray(weight, dtype=np.float64)
        kinds.append((np.where(np.isnan(x), -np.inf, x), w))
    threshold = np.unique(np.concatenate([x for x, _ in kinds]))[::-1]
    threshold = threshold[np.isfinite(threshold)]
    shares = []
    for x, w in kinds:
        order = np.argsort(-x)
        above = np.searchsorted(-x[order], -threshold, side="right")
        sums = np.concatenate([[0.0], np.cumsum(w[order])])
        shares.append(sums[above] / w.sum() if w.sum() > 0 else np.zeros(len(above)))
    return Roc(threshold, shares[0], shares[1])


@dataclasses.dataclass(frozen=True)
class TagRates:
    """Efficiency and mistag rate of a tag with their statistical errors."""

    efficiency: float
    efficiency_error: float
    mistag: float
    mistag_error: float


def tag_rates(signal_tagged: ArrayLike, background_tagged: ArrayLike) -> TagRates:
    """Return how often tops and other fat jets are tagged.

    Parameters
    ----------
    signal_tagged, background_tagged : array of bool, shape (F,)
        Whether each fat jet is tagged.

    Returns
    -------
    TagRates
        Shares with binomial errors (that of the simulated sample); NaN for none.
    """
    numbers: list[float] = []
    for tagged in (signal_tagged, background_tagged):
        x = np.asarray(tagged, dtype=bool)
        share = float(x.mean()) if len(x) else np.nan
        error = float(np.sqrt(share * (1 - share) / len(x))) if len(x) else np.nan
        numbers += [share, error]
    return TagRates(*numbers)
