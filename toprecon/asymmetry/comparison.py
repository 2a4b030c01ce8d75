"""Two reconstructions of the same events, side by side with paired errors.

Events are matched by identity. Each quantity is a smooth function of sums over
events, so that every event has a small influence on it; the variance of a difference
is the sum of the squared differences of the influences. Fluctuations that both
reconstructions share drop out.
"""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import StudyError
from toprecon.events import EventTable, PairingClass
from toprecon.statistics import Measured, weighted_share

FloatArray = NDArray[np.float64]

QUANTITIES = {
    "generated": "A_FB of all signal, generated angle",
    "generated_selected": "A_FB of the selected signal, generated angle",
    "reconstructed_signal": "A_FB of the selected signal, reconstructed angle",
    "reconstructed": "A_FB of all selected events, reconstructed angle",
    "shift": "selected signal: reconstructed minus generated",
    "total_shift": "reconstructed (all selected) minus generated (all signal)",
    "efficiency": "share of the signal that is selected",
}
"""What is compared; the names are those of an asymmetry result."""


@dataclasses.dataclass(frozen=True)
class Rows:
    """A table, the rows selected and their weights.

    Parameters
    ----------
    table : EventTable
        Rows.
    selected : array of bool, shape (E,)
        Rows that pass everything.
    weight : array, shape (E,)
        Weights.
    """

    table: EventTable
    selected: NDArray[np.bool_]
    weight: FloatArray


@dataclasses.dataclass(frozen=True)
class Difference:
    """One quantity in both reconstructions.

    Parameters
    ----------
    name, meaning : str
        Key and text of :data:`QUANTITIES`.
    first, second : Measured
        With their own errors.
    difference : Measured
        Second minus first, with the paired error.
    """

    name: str
    meaning: str
    first: Measured
    second: Measured
    difference: Measured

    @property
    def significance(self) -> float:
        """Difference over its error; 0 if both are the same event by event."""
        d = self.difference
        return d.value / d.error if d.error else 0.0 * d.value


@dataclasses.dataclass(frozen=True)
class Comparison:
    """Two reconstructions of the same events.

    Parameters
    ----------
    common : int
        Rows with the same identity in both tables.
    only_first, only_second : int
        Rows without a partner.
    selected_both, selected_first, selected_second : int
        Common rows selected in both, and in one only.
    moved : Measured
        Of the common rows selected in both: share whose hemisphere changes.
    classes : array, shape (C, C)
        Common signal rows selected in both, by pairing class in the first (rows) and
        in the second (columns); weights of the first.
    differences : dict of Difference
        By the names of :data:`QUANTITIES`.
    """

    common: int
    only_first: int
    only_second: int
    selected_both: int
    selected_first: int
    selected_second: int
    moved: Measured
    classes: FloatArray
    differences: dict[str, Difference]

    def __getitem__(self, name: str) -> Difference:
        return self.differences[name]

    def __str__(self) -> str:
        d = self.differences["reconstructed"]
        return (
            f"{self.common} common events; A_FB reconstructed {d.first} and {d.second}, "
            f"difference {d.difference}"
        )


def compare(first: Rows, second: Rows) -> Comparison:
    """Compare two reconstructions of the same events.

    Parameters
    ----------
    first, second : Rows
        Tables of the same events, in any order; one may lack some.

    Returns
    -------
    Comparison
        Differences are second minus first.

    Raises
    ------
    StudyError
        If an identity occurs twice in a table, or the tables share none.
    """
    for place, rows in (("first", first), ("second", second)):
        ordered = np.sort(rows.table["id"])  # faster than counting unique values
        repeated = int((ordered[1:] == ordered[:-1]).sum())
        if repeated:
            msg = (
                f"comparison: every event may occur once, but the {place} table has "
                f"{repeated} repeated identities"
            )
            raise StudyError(msg)
    ids, at_first, at_second = np.intersect1d(
        first.table["id"], second.table["id"], assume_unique=True, return_indices=True
    )
    if not len(ids):
        msg = (
            "comparison: two tables of the same events are required, but they share no "
            "identity; reconstruct the same files with both plans"
        )
        raise StudyError(msg)
    both = first.selected[at_first] & second.selected[at_second]
    hemispheres = [
        rows.table["cos_theta_reco"][at] >= 0
        for rows, at in ((first, at_first), (second, at_second))
    ]
    return Comparison(
        common=len(ids),
        only_first=len(first.table) - len(ids),
        only_second=len(second.table) - len(ids),
        selected_both=int(both.sum()),
        selected_first=int(
            (first.selected[at_first] & ~second.selected[at_second]).sum()
        ),
        selected_second=int(
            (~first.selected[at_first] & second.selected[at_second]).sum()
        ),
        moved=_share(hemispheres[0] != hemispheres[1], both, first.weight[at_first]),
        classes=_classes(first, second, at_first, at_second, both),
        differences=_differences(first, second, at_first, at_second),
    )


def _differences(
    first: Rows,
    second: Rows,
    at_first: NDArray[np.intp],
    at_second: NDArray[np.intp],
) -> dict[str, Difference]:
    """All quantities with their paired differences."""
    ours, theirs = influences(first), influences(second)
    out = {}
    for name, meaning in QUANTITIES.items():
        (a, psi_a), (b, psi_b) = ours[name], theirs[name]
        variance_a, variance_b = psi_a @ psi_a, psi_b @ psi_b
        shared = np.zeros(len(psi_b))
        shared[at_second] = psi_a[at_first]
        apart = psi_b - shared
        alone = np.ones(len(psi_a), dtype=bool)
        alone[at_first] = False
        variance = apart @ apart + psi_a[alone] @ psi_a[alone]
        out[name] = Difference(
            name,
            meaning,
            Measured(a, float(np.sqrt(variance_a))),
            Measured(b, float(np.sqrt(variance_b))),
            Measured(b - a, float(np.sqrt(variance))),
        )
    return out


def influences(rows: Rows) -> dict[str, tuple[float, FloatArray]]:
    """Return every quantity with the influence of each event on it.

    Parameters
    ----------
    rows : Rows
        Rows.

    Returns
    -------
    dict
        By the names of :data:`QUANTITIES`: value, and array of shape (E,) whose sum of
        squares is the variance.
    """
    table, weight = rows.table, rows.weight
    signal = table["is_signal"]
    good = rows.selected & signal
    true = np.where(table["cos_theta_true"] >= 0, 1.0, -1.0)
    reco = np.where(table["cos_theta_reco"] >= 0, 1.0, -1.0)
    out = {
        "generated": _mean(true, signal, weight),
        "generated_selected": _mean(true, good, weight),
        "reconstructed_signal": _mean(reco, good, weight),
        "reconstructed": _mean(reco, rows.selected, weight),
        "efficiency": _mean(good.astype(np.float64), signal, weight),
    }
    for name, later, earlier in (
        ("shift", "reconstructed_signal", "generated_selected"),
        ("total_shift", "reconstructed", "generated"),
    ):
        a, b = out[later], out[earlier]
        out[name] = (a[0] - b[0], a[1] - b[1])
    return out


def _mean(
    values: FloatArray, among: NDArray[np.bool_], weight: FloatArray
) -> tuple[float, FloatArray]:
    """Weighted mean of some rows, with the influence of every row."""
    w = np.where(among, weight, 0.0)
    total = w.sum()
    if total == 0:
        return float("nan"), np.full(len(w), np.nan)
    mean = float((w * values).sum() / total)
    return mean, w * (values - mean) / total


def _share(
    found: NDArray[np.bool_], among: NDArray[np.bool_], weight: FloatArray
) -> Measured:
    """Weighted share with its error."""
    return weighted_share(weight[among], found[among])


def _classes(
    first: Rows,
    second: Rows,
    at_first: NDArray[np.intp],
    at_second: NDArray[np.intp],
    both: NDArray[np.bool_],
) -> FloatArray:
    """How the pairing class of common selected signal changes."""
    n = len(PairingClass)
    mask = both & first.table["is_signal"][at_first]
    before = first.table["pairing_class"][at_first][mask].astype(np.int64)
    after = second.table["pairing_class"][at_second][mask].astype(np.int64)
    sums = np.bincount(
        before * n + after, first.weight[at_first][mask], minlength=n * n
    )
    return sums.astype(np.float64).reshape(n, n)
