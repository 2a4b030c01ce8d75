"""How many events are left after each step."""

from __future__ import annotations

import dataclasses
from typing import Any

import numpy as np
from numpy.typing import NDArray


@dataclasses.dataclass(frozen=True)
class CutFlow:
    """Events left after every step, beginning with all of them.

    Parameters
    ----------
    steps : tuple of str
        Names; the first is the start (``"all events"``).
    counts : array of int, shape (S,)
        Entries left.
    sums : array, shape (S,)
        Sum of weights left.
    variances : array, shape (S,)
        Sum of squared weights left.
    """

    steps: tuple[str, ...]
    counts: NDArray[np.int64]
    sums: NDArray[np.float64]
    variances: NDArray[np.float64]

    @classmethod
    def from_stage(
        cls,
        stage: Any,
        weight: Any,
        steps: tuple[str, ...],
        *,
        start: str = "all events",
    ) -> CutFlow:
        """Count the events left after every step.

        Parameters
        ----------
        stage : array of int, shape (E,)
            0 if all steps are passed, else 1 + index of the step that failed.
        weight : array, shape (E,)
            Event weights.
        steps : tuple of str
            Names of the steps, in order.
        start : str
            Name of the state before the first step.

        Returns
        -------
        CutFlow
            With ``len(steps) + 1`` entries.
        """
        stage = np.asarray(stage, dtype=np.int64)
        weight = np.asarray(weight, dtype=np.float64)
        n = len(steps) + 1
        failed = [
            np.bincount(stage, weights=w, minlength=n)[:n]
            for w in (np.ones_like(weight), weight, weight**2)
        ]
        left = []
        for total in failed:
            lost = np.concatenate([[0.0], np.cumsum(total[1:])])
            left.append(total.sum() - lost)
        return cls(
            steps=(start, *steps),
            counts=np.rint(left[0]).astype(np.int64),
            sums=left[1],
            variances=left[2],
        )

    @property
    def efficiency(self) -> NDArray[np.float64]:
        """Share of the weight at the start that is left; NaN for an empty start."""
        with np.errstate(invalid="ignore", divide="ignore"):
            return self.sums / self.sums[0]

    def __add__(self, other: CutFlow) -> CutFlow:
        if self.steps != other.steps:
            msg = f"cut flows of different steps: {self.steps} and {other.steps}"
            raise ValueError(msg)
        return CutFlow(
            self.steps,
            self.counts + other.counts,
            self.sums + other.sums,
            self.variances + other.variances,
        )

    def scaled(self, factor: float) -> CutFlow:
        """Return the flow with all weights multiplied by a factor."""
        return dataclasses.replace(
            self, sums=self.sums * factor, variances=self.variances * factor**2
        )

    def __str__(self) -> str:
        width = max(len(step) for step in self.steps)
        rows = zip(self.steps, self.counts, self.efficiency, strict=True)
        return "\n".join(f"{s:<{width}} {n:>10d} {e:8.4f}" for s, n, e in rows)
