"""Bins with edges in float64, digitised the same way everywhere."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterable
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import OptionError


@dataclasses.dataclass(frozen=True)
class Binning:
    """Increasing bin edges; every bin includes its lower edge.

    The last bin includes its upper edge too, so that cos(theta) = 1 has a bin.

    Parameters
    ----------
    edges : tuple of float
        At least two, strictly increasing and finite.
    """

    edges: tuple[float, ...]

    def __post_init__(self) -> None:
        values = np.asarray(self.edges, dtype=np.float64)
        if values.ndim != 1 or len(values) < 2:
            msg = f"edges: at least two are required; got {self.edges!r}"
            raise OptionError(msg)
        if not np.all(np.isfinite(values)) or not np.all(np.diff(values) > 0):
            msg = f"edges: must be finite and strictly increasing; got {self.edges!r}"
            raise OptionError(msg)
        object.__setattr__(self, "edges", tuple(float(x) for x in values))

    @classmethod
    def regular(cls, n: int, low: float, high: float) -> Self:
        """Return n bins of equal width."""
        return cls(tuple(np.linspace(low, high, n + 1)))

    @classmethod
    def of(cls, edges: Iterable[float]) -> Self:
        """Return the binning with these edges."""
        return cls(tuple(edges))

    def __len__(self) -> int:
        return len(self.edges) - 1

    @property
    def array(self) -> NDArray[np.float64]:
        """Edges as an array, shape (B + 1,)."""
        return np.asarray(self.edges, dtype=np.float64)

    @property
    def centres(self) -> NDArray[np.float64]:
        """Middle of every bin, shape (B,)."""
        return 0.5 * (self.array[1:] + self.array[:-1])

    @property
    def widths(self) -> NDArray[np.float64]:
        """Width of every bin, shape (B,)."""
        return np.diff(self.array)

    def digitise(self, values: Any) -> NDArray[np.int64]:
        """Return the bin of every value.

        Parameters
        ----------
        values : array, shape (E,)
            Compared in float64 whatever their type.

        Returns
        -------
        array of int, shape (E,)
            0 .. B-1, or -1 for NaN and for values outside the edges.
        """
        x = np.asarray(values, dtype=np.float64)
        index = np.searchsorted(self.array, x, side="right") - 1
        index[x == self.edges[-1]] = len(self) - 1
        index[~((x >= self.edges[0]) & (x <= self.edges[-1]))] = -1
        return index
