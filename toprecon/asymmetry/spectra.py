"""Histograms of the production angle: generated, and after each step."""

from __future__ import annotations

import dataclasses
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from toprecon.events import Binning, EventTable, PairingClass

FloatArray = NDArray[np.float64]

BINS = Binning.regular(40, -1.0, 1.0)
"""Fine bins of cos(theta), symmetric about 0; coarser ones are sums of these."""

FLIP_BINS = Binning.regular(10, 0.0, 1.0)
"""Bins of |cos(theta)| for the flip fraction."""

SIGNED_FLIP_BINS = Binning(
    (*(-x for x in reversed(FLIP_BINS.edges[1:])), *FLIP_BINS.edges)
)

VARIANTS = {
    "generated": "generated, all signal events",
    "generated_selected": "generated, selected signal events",
    "closest": "jets of the generated quarks, true charge (matched events)",
    "chosen": "chosen jets, true charge",
    "reconstructed_signal": "chosen jets, measured charge, signal",
    "outside": "signal process outside the truth phase space",
    "background": "other processes",
}
"""Spectra by name, with their meaning."""


@dataclasses.dataclass(frozen=True)
class AngleSpectra:
    """Weighted histograms of cos(theta).

    Parameters
    ----------
    sums, variances : dict of array, shape (B,)
        Sums of weights and of squared weights, by the names of :data:`VARIANTS` and,
        for reconstructed signal of one class, ``class.<name>``.
    flips, flips_variances : array, shape (2, 2, F)
        By true hemisphere (0 backward, 1 forward), by outcome (0 kept, 1 flipped) and
        by bin of the generated |cos(theta)|.
    """

    sums: dict[str, FloatArray]
    variances: dict[str, FloatArray]
    flips: FloatArray
    flips_variances: FloatArray

    def __add__(self, other: Self) -> Self:
        return dataclasses.replace(
            self,
            sums={k: v + other.sums[k] for k, v in self.sums.items()},
            variances={k: v + other.variances[k] for k, v in self.variances.items()},
            flips=self.flips + other.flips,
            flips_variances=self.flips_variances + other.flips_variances,
        )

    def scaled(self, factor: float) -> Self:
        """Return the histograms with every weight multiplied by a factor."""
        return dataclasses.replace(
            self,
            sums={k: v * factor for k, v in self.sums.items()},
            variances={k: v * factor**2 for k, v in self.variances.items()},
            flips=self.flips * factor,
            flips_variances=self.flips_variances * factor**2,
        )

    def reconstructed(self) -> tuple[FloatArray, FloatArray]:
        """Return all selected events: signal, outside and background together."""
        names = ("reconstructed_signal", "outside", "background")
        return (
            sum((self.sums[n] for n in names), np.zeros(len(BINS))),
            sum((self.variances[n] for n in names), np.zeros(len(BINS))),
        )

    def rebinned(self, name: str, group: int) -> tuple[FloatArray, FloatArray]:
        """Return sums and variances of ``group`` neighbouring bins joined."""
        sums, variances = (
            self.reconstructed()
            if name == "reconstructed"
            else (self.sums[name], self.variances[name])
        )
        return sums.reshape(-1, group).sum(1), variances.reshape(-1, group).sum(1)

    @classmethod
    def accumulate(
        cls, table: EventTable, selected: NDArray[np.bool_], weight: FloatArray
    ) -> Self:
        """Fill the histograms from rows of a table.

        Parameters
        ----------
        table : EventTable
            Rows.
        selected : array of bool, shape (E,)
            Rows that pass everything.
        weight : array, shape (E,)
            Weights.

        Returns
        -------
        AngleSpectra
            NaN angles enter no bin.
        """
        signal = table["is_signal"]
        chosen_signal = selected & signal
        process = table.is_signal_process
        true, reco = "cos_theta_true", "cos_theta_reco"
        wanted: dict[str, tuple[str, Any]] = {
            "generated": (true, signal),
            "generated_selected": (true, chosen_signal),
            "closest": ("cos_theta_closest", chosen_signal),
            "chosen": ("cos_theta_chosen", chosen_signal),
            "reconstructed_signal": (reco, chosen_signal),
            "outside": (reco, selected & process & ~signal),
            "background": (reco, selected & ~process),
        }
        for item in PairingClass:
            mask = chosen_signal & (table["pairing_class"] == item)
            wanted[f"class.{item.name.lower()}"] = (reco, mask)
        sums, variances = {}, {}
        for name, (column, mask) in wanted.items():
            index = table.bins(column, BINS)
            sums[name], variances[name] = _fill(index[mask], weight[mask])
        flips, flips_variances = _flips(table, chosen_signal, weight)
        return cls(sums, variances, flips, flips_variances)


def _fill(
    index: NDArray[np.int16], weight: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Add weights and squared weights per fine bin."""
    n = len(BINS) + 1  # the first cell takes what is in no bin
    cell = index + np.int16(1)
    return (
        np.bincount(cell, weight, minlength=n).astype(np.float64)[1:],
        np.bincount(cell, weight**2, minlength=n).astype(np.float64)[1:],
    )


def _flips(
    table: EventTable, mask: NDArray[np.bool_], weight: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Kept and flipped events by hemisphere and |cos(theta)|."""
    true, reco = table["cos_theta_true"][mask], table["cos_theta_reco"][mask]
    index = table.bins("cos_theta_true", SIGNED_FLIP_BINS)[mask].astype(np.int64)
    n = len(FLIP_BINS)
    folded = np.where(index >= n, index - n, n - 1 - index)
    good = (index >= 0) & np.isfinite(reco)
    forward, flipped = true >= 0, (true >= 0) != (reco >= 0)
    cell = ((forward * 2 + flipped) * n + folded)[good]
    w = weight[mask][good]
    shape = (2, 2, n)
    size = int(np.prod(shape))
    return (
        np.bincount(cell, w, minlength=size).astype(np.float64).reshape(shape),
        np.bincount(cell, w**2, minlength=size).astype(np.float64).reshape(shape),
    )
