"""Score of a hypothesis from the joint density of its quantities."""

from __future__ import annotations

import dataclasses
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from toprecon.events import Channel
from toprecon.pairing import legs
from toprecon.pairing.calibration import Calibration, transformed
from toprecon.pairing.densities import Mixture
from toprecon.pairing.engine import Group, hadronic_legs, leptonic_legs
from toprecon.pairing.hypotheses import Hypotheses
from toprecon.pairing.names import HADRONIC_TERMS, LEPTONIC_TERMS, TermName
from toprecon.pairing.options import ScoreKind

FloatArray = NDArray[np.float64]


@dataclasses.dataclass(frozen=True)
class JointScore:
    """Chi-square with covariance, or -2 ln of a likelihood ratio.

    Parameters
    ----------
    calibration : Calibration
        Densities.
    kind : ScoreKind
        ``correlated`` or ``ratio``.
    sqrt_s : array, shape (E,)
        Collision energies of the group [GeV].
    """

    calibration: Calibration
    kind: ScoreKind
    sqrt_s: FloatArray

    def table(
        self,
        group: Group,
        table: Hypotheses,
        events: slice,
        allowed: NDArray[np.bool_],
    ) -> FloatArray:
        """Return the contribution of allowed hypotheses, shape (P, events)."""
        sqrt_s = self.sqrt_s[events]
        first = [
            leg_values(leg, self.calibration.names, sqrt_s)
            for _, _, leg in hadronic_legs(group, table, events)
        ]
        result = np.zeros(allowed.shape)
        if table.is_leptonic:
            second = [
                leg_values(leg, self.calibration.names, sqrt_s)
                for _, leg in leptonic_legs(group, table, events)
            ]
            for row, (one, two) in enumerate(table.rows.tolist()):
                values = np.concatenate([first[one], second[two]])
                result[row, allowed[row]] = self.score(values[:, allowed[row]])
            return result
        needed = np.zeros((len(first), allowed.shape[1]), dtype=bool)
        for column in table.rows.T:
            np.logical_or.at(needed, column, allowed)
        sides = np.zeros(needed.shape)
        for row, values in enumerate(first):
            sides[row, needed[row]] = self.score(values[:, needed[row]])
        both: FloatArray = sides[table.rows[:, 0]] + sides[table.rows[:, 1]]
        return both

    def score(self, values: FloatArray, n_first: int | None = None) -> FloatArray:
        """Return the score of values (D, N), or of the first quantities alone."""
        n = len(values) if n_first is None else n_first
        if n == 0:
            return np.zeros(values.shape[1])
        if self.kind is ScoreKind.CORRELATED:
            return _part(self.calibration.gaussian, n).distance(values[:n])
        right = _part(self.calibration.right, n).log_density(values[:n])
        wrong = _part(self.calibration.wrong, n).log_density(values[:n])
        return 2.0 * (wrong - right)

    def contributions(
        self,
        values: dict[TermName, FloatArray],
        rows: NDArray[np.int64],
        channel: Channel,
    ) -> dict[str, FloatArray]:
        """Return the steps by name for chosen pairs; all-hadronic: sums of the sides."""
        names = self.calibration.names
        sides = [names]
        if channel is Channel.ALL_HADRONIC:
            other = tuple(LEPTONIC_TERMS[HADRONIC_TERMS.index(n)] for n in names)
            sides.append(other)
        total = np.zeros((len(names), len(rows)))
        for side in sides:
            chosen = [transformed(n, values[n][rows], self.sqrt_s) for n in side]
            total += np.stack(self.steps(np.stack(chosen)))
        return {n.value: row for n, row in zip(names, total, strict=True)}

    def steps(self, values: FloatArray) -> list[FloatArray]:
        """Return what each quantity adds to the score, given those before it."""
        sums = [self.score(values, n) for n in range(len(values) + 1)]
        return [after - before for before, after in pairwise(sums)]


def _part(mixture: Mixture, n: int) -> Mixture:
    return mixture if n == mixture.n_dimensions else mixture.first(n)


def leg_values(
    leg: legs.Leg,
    names: tuple[TermName, ...],
    sqrt_s: FloatArray,
    *,
    plain: bool = False,
) -> FloatArray:
    """Return quantities of a leg by name (D, E), transformed unless plain."""
    leptonic = leg.side is legs.LEPTONIC
    wanted = [name for name in names if (name in LEPTONIC_TERMS) is leptonic]
    values = dict(leg.values(wanted))
    if leg.side.w_mass in wanted:
        values[leg.side.w_mass] = np.sqrt(leg.w.mass2)
    rows = [
        values[name] if plain else transformed(name, values[name], sqrt_s)
        for name in wanted
    ]
    return np.stack(rows) if rows else np.empty((0, len(sqrt_s)))
