"""What lies behind a cut: an observable by pairing class, all other cuts applied."""

from __future__ import annotations

from collections import OrderedDict

import numpy as np
from numpy.typing import NDArray

from toprecon.events import Binning, EventTable, PairingClass
from toprecon.study.cutting import is_reconstructed, passes_cut
from toprecon.study.plan import CutOptions, StudyPlan
from toprecon.study.weights import SampleFactors

GROUPS = (*(item.name.lower() for item in PairingClass), "outside", "background")
"""Signal by pairing class, signal process outside the truth phase space, others."""

MASKS_KEPT = 24


class TableMasks:
    """Masks of one table, worked out once per cut.

    Parameters
    ----------
    table : EventTable
        The table; it must not change.
    """

    def __init__(self, table: EventTable) -> None:
        self._table = table
        self._masks: OrderedDict[CutOptions, NDArray[np.bool_]] = OrderedDict()
        self.start = (table["stage"] == 0) & is_reconstructed(table)
        outside, background = len(PairingClass), len(PairingClass) + 1
        process = np.where(table.is_signal_process, outside, background)
        self.group = np.where(
            table["is_signal"], table["pairing_class"], process
        ).astype(np.int16)

    def passing(self, plan: StudyPlan, *, without: str = "") -> NDArray[np.bool_]:
        """Return the rows that pass everything, or everything but the cut on one.

        Parameters
        ----------
        plan : StudyPlan
            Its active cuts are applied.
        without : str
            Observable whose cut is left out.

        Returns
        -------
        array of bool, shape (E,)
            A new array.
        """
        keep = self.start.copy()
        for cut in plan.active_cuts:
            if cut.observable != without:
                keep &= self._mask(cut)
        return keep

    def distribution(
        self, plan: StudyPlan, factors: SampleFactors, observable: str, binning: Binning
    ) -> dict[str, NDArray[np.float64]]:
        """Histogram an observable by class, with all cuts but its own.

        Parameters
        ----------
        plan : StudyPlan
            Its active cuts are applied, except that on the observable.
        factors : SampleFactors
            What the generator weights of each sample are multiplied with.
        observable : str
            A column of the table.
        binning : Binning
            Bins; rows outside them, or undefined, enter nowhere.

        Returns
        -------
        dict of array, shape (B,)
            Sums of weights by the names of :data:`GROUPS` that occur.
        """
        table, n = self._table, len(binning)
        index = table.bins(observable, binning)
        rows = np.flatnonzero(self.passing(plan, without=observable) & (index >= 0))
        scale = np.array([factors.factors[s.name] for s in table.samples])
        weight = table["weight"][rows] * scale[table["sample"][rows]]
        cell = self.group[rows].astype(np.int64) * n + index[rows]
        sums = np.bincount(cell, weight, minlength=len(GROUPS) * n).reshape(-1, n)
        there = np.bincount(self.group[rows], minlength=len(GROUPS)) > 0
        return {
            name: sums[row].astype(np.float64)
            for row, name in enumerate(GROUPS)
            if there[row]
        }

    def _mask(self, cut: CutOptions) -> NDArray[np.bool_]:
        """Rows that pass one cut, remembered for a while."""
        if cut not in self._masks:
            self._masks[cut] = passes_cut(self._table, cut)
        self._masks.move_to_end(cut)
        while len(self._masks) > MASKS_KEPT:
            self._masks.popitem(last=False)
        return self._masks[cut]
