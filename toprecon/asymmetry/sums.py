"""The additive state of the asymmetry.

Every event belongs to one category and contributes the vector

    u = (1, s_true, s_closest, s_chosen, s_reco, s_true s_reco, s_true s_chosen)

with s = +1 for a forward and -1 for a backward top. Kept are sum(w u) and
sum(w^2 u u^T) for each category. All results are functions of the first, and their
errors follow from the second by linear propagation, at any chunking.
"""

from __future__ import annotations

import dataclasses
from typing import Self

import numpy as np
from numpy.typing import NDArray

from toprecon.asymmetry.result import AsymmetryResult
from toprecon.asymmetry.spectra import AngleSpectra
from toprecon.asymmetry.state import (
    BACKGROUND,
    N_CATEGORIES,
    OUTSIDE,
    REJECTED,
)
from toprecon.events import EventTable, PairingClass

FloatArray = NDArray[np.float64]


@dataclasses.dataclass(frozen=True)
class AsymmetrySums:
    """Sums over events; added for chunks, scaled for luminosity and beams.

    Parameters
    ----------
    first : array, shape (C, 7)
        sum(w u) per category.
    second : array, shape (C, 7, 7)
        sum(w^2 u u^T) per category.
    counts : array of int, shape (C,)
        Rows per category.
    spectra : AngleSpectra
        Histograms of the angles.
    """

    first: FloatArray
    second: FloatArray
    counts: NDArray[np.int64]
    spectra: AngleSpectra

    def __add__(self, other: Self) -> Self:
        return dataclasses.replace(
            self,
            first=self.first + other.first,
            second=self.second + other.second,
            counts=self.counts + other.counts,
            spectra=self.spectra + other.spectra,
        )

    def scaled(self, factor: float) -> Self:
        """Return the sums with every weight multiplied by a factor."""
        return dataclasses.replace(
            self,
            first=self.first * factor,
            second=self.second * factor**2,
            spectra=self.spectra.scaled(factor),
        )

    def result(self) -> AsymmetryResult:
        """Return A_FB and everything that follows from the sums."""
        return AsymmetryResult(self.first, self.second, self.counts, self.spectra)


def accumulate(
    table: EventTable,
    selected: NDArray[np.bool_],
    weight: FloatArray,
) -> AsymmetrySums:
    """Sum rows of an event table.

    Parameters
    ----------
    table : EventTable
        Rows.
    selected : array of bool, shape (E,)
        Rows that pass selection, reconstruction and cuts.
    weight : array, shape (E,)
        Weights, usually the generator's.

    Returns
    -------
    AsymmetrySums
        Rows that are neither selected nor signal inside the truth phase space do not
        enter.
    """
    selected = np.asarray(selected, dtype=bool)
    weight = np.asarray(weight, dtype=np.float64)
    is_signal = table["is_signal"]
    category = np.full(len(table), -1, dtype=np.int64)
    category[selected] = np.where(
        is_signal[selected],
        table["pairing_class"][selected],
        np.where(table.is_signal_process[selected], OUTSIDE, BACKGROUND),
    )
    category[is_signal & ~selected] = REJECTED
    rows = np.flatnonzero(category >= 0)
    # u takes few values: sum the weights per value, then multiply
    pattern = _patterns(table, rows, selected[rows])
    cell = category[rows] * len(U_VALUES) + pattern
    size = N_CATEGORIES * len(U_VALUES)
    w = weight[rows]
    shape = (N_CATEGORIES, len(U_VALUES))
    sums = np.bincount(cell, w, minlength=size).reshape(shape)
    squares = np.bincount(cell, w**2, minlength=size).reshape(shape)
    first = sums @ U_VALUES
    second = np.einsum("cp,pi,pj->cij", squares, U_VALUES, U_VALUES)
    counts = np.bincount(category[rows], minlength=N_CATEGORIES)
    spectra = AngleSpectra.accumulate(table, selected, weight)
    return AsymmetrySums(first, second, counts, spectra)


def _u_values() -> FloatArray:
    """All values of u, shape (81, 7); row 27 t + 9 c + 3 h + r with signs + 1."""
    t, c, h, r = (x.ravel() - 1.0 for x in np.indices((3, 3, 3, 3)))
    return np.stack([np.ones_like(t), t, c, h, r, t * r, t * h], axis=1)


U_VALUES = _u_values()


def signs(cosines: NDArray[np.float64]) -> NDArray[np.int64]:
    """Return +1 for forward (cos >= 0), -1 for backward, 0 for NaN."""
    return (cosines >= 0).astype(np.int64) - (cosines < 0)


def _patterns(
    table: EventTable, rows: NDArray[np.int64], selected: NDArray[np.bool_]
) -> NDArray[np.int64]:
    """Rows of :data:`U_VALUES` for some rows of the table."""
    true = signs(table["cos_theta_true"][rows])
    reco = np.where(selected, signs(table["cos_theta_reco"][rows]), 0)
    chosen = np.where(selected, signs(table["cos_theta_chosen"][rows]), 0)
    # a charge that the truth cannot decide makes no charge error
    chosen = np.where(selected & (chosen == 0), reco, chosen)
    closest = np.where(selected, signs(table["cos_theta_closest"][rows]), 0)
    is_correct = table["pairing_class"][rows] == PairingClass.CORRECT
    # the same jets in another order of addition may differ by rounding
    closest = np.where(is_correct & selected, chosen, closest)
    return 27 * (true + 1) + 9 * (closest + 1) + 3 * (chosen + 1) + (reco + 1)
