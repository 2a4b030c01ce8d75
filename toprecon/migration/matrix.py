"""The migration matrix and everything that has to travel with it.

Membership: signal inside the truth phase space and selected enters the matrix; inside
and not selected is missed; signal process selected but outside the truth phase space
comes from outside (fakes); other processes are background. The pairing class never
decides membership.
"""

from __future__ import annotations

import dataclasses
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import StudyError
from toprecon.events import Binning, EventTable
from toprecon.migration.options import MigrationOptions
from toprecon.resampling import replica_counts

FloatArray = NDArray[np.float64]

ARRAYS = ("counts", "generated", "missed", "from_outside", "background")
"""Arrays that have sums of squared weights beside them."""


@dataclasses.dataclass(frozen=True)
class MigrationMatrix:
    """Counts of generated against reconstructed bins.

    Parameters
    ----------
    true_binning, reco_binning : Binning
        Bins of the generated (T bins) and the reconstructed (R bins) cos(theta).
    counts : array, shape (T, R)
        Signal inside the truth phase space, selected: ``counts[true, reco]``.
    generated : array, shape (T,)
        The same events, selected or not: sum over reco of ``counts``, plus ``missed``.
    missed : array, shape (T,)
        Not selected, or reconstructed outside the reconstructed edges.
    from_outside : array, shape (R,)
        Signal process, selected, but outside the truth phase space or the true edges.
    background : array, shape (R,)
        Other processes, selected.
    counts_variances, ... : arrays of the same shapes
        Sums of squared weights.
    replicas : array, shape (N, T + 2, R + 1)
        Poisson replicas of all of them in one block, see :meth:`replica`; N may be 0.
    """

    true_binning: Binning
    reco_binning: Binning
    counts: FloatArray
    counts_variances: FloatArray
    generated: FloatArray
    generated_variances: FloatArray
    missed: FloatArray
    missed_variances: FloatArray
    from_outside: FloatArray
    from_outside_variances: FloatArray
    background: FloatArray
    background_variances: FloatArray
    replicas: FloatArray

    def __post_init__(self) -> None:
        t, r = len(self.true_binning), len(self.reco_binning)
        shapes = {
            "counts": (t, r),
            "generated": (t,),
            "missed": (t,),
            "from_outside": (r,),
            "background": (r,),
        }
        shapes |= {f"{name}_variances": shape for name, shape in shapes.items()}
        shapes["replicas"] = (len(self.replicas), t + 2, r + 1)
        for name, shape in shapes.items():
            found = np.shape(getattr(self, name))
            if found != shape:
                msg = (
                    f"migration matrix: {name} must have the shape {shape} of its "
                    f"bins; got {found}"
                )
                raise StudyError(msg)

    @classmethod
    def from_blocks(
        cls,
        true_binning: Binning,
        reco_binning: Binning,
        block: FloatArray,
        variances: FloatArray,
        replicas: FloatArray | None = None,
    ) -> Self:
        """Return the matrix of blocks as :func:`cells_of` lays them out.

        Parameters
        ----------
        true_binning, reco_binning : Binning
            Bins.
        block, variances : array, shape (T + 2, R + 1)
            Sums of weights and of squared weights.
        replicas : array, shape (N, T + 2, R + 1), optional
            Poisson replicas.

        Returns
        -------
        MigrationMatrix
            With copies of the parts.
        """
        t = len(true_binning)
        parts = {}
        for suffix, values in (("", block), ("_variances", variances)):
            parts[f"counts{suffix}"] = values[:t, :-1].copy()
            parts[f"generated{suffix}"] = values[:t].sum(axis=1)
            parts[f"missed{suffix}"] = values[:t, -1].copy()
            parts[f"from_outside{suffix}"] = values[t, :-1].copy()
            parts[f"background{suffix}"] = values[t + 1, :-1].copy()
        if replicas is None:
            replicas = np.zeros((0, *block.shape))
        return cls(true_binning, reco_binning, **parts, replicas=replicas)

    def blocks(self) -> tuple[FloatArray, FloatArray]:
        """Return sums of weights and of squared weights as blocks.

        Returns
        -------
        tuple of array, shape (T + 2, R + 1)
            As :func:`cells_of` lays them out; the last column of the rows for events
            from outside and for background is 0.
        """
        t, r = self.counts.shape
        out = []
        for suffix in ("", "_variances"):
            block = np.zeros((t + 2, r + 1))
            block[:t, :-1] = getattr(self, f"counts{suffix}")
            block[:t, -1] = getattr(self, f"missed{suffix}")
            block[t, :-1] = getattr(self, f"from_outside{suffix}")
            block[t + 1, :-1] = getattr(self, f"background{suffix}")
            out.append(block)
        return out[0], out[1]

    @property
    def arrays(self) -> dict[str, FloatArray]:
        """All arrays by name."""
        names = [*ARRAYS, *(f"{name}_variances" for name in ARRAYS), "replicas"]
        return {name: getattr(self, name) for name in names}

    def __add__(self, other: Self) -> Self:
        same_true = self.true_binning == other.true_binning
        if not same_true or self.reco_binning != other.reco_binning:
            msg = "migration matrices: equal bins are required to add them"
            raise StudyError(msg)
        if self.replicas.shape != other.replicas.shape:
            msg = "migration matrices: equally many replicas are required to add them"
            raise StudyError(msg)
        theirs = other.arrays
        added: dict[str, Any] = {
            name: mine + theirs[name] for name, mine in self.arrays.items()
        }
        return dataclasses.replace(self, **added)

    def without(self, part: Self) -> Self:
        """Return what is left without a part of the events, such as half A.

        Parameters
        ----------
        part : MigrationMatrix
            Filled from a part of the rows, with the same weights.

        Returns
        -------
        MigrationMatrix
            Without replicas; what only rounding leaves is 0.
        """
        blocks = []
        for mine, theirs in zip(self.blocks(), part.blocks(), strict=True):
            left = mine - theirs
            left[np.abs(left) <= 1e-12 * np.abs(mine)] = 0.0
            blocks.append(left)
        return type(self).from_blocks(self.true_binning, self.reco_binning, *blocks)

    def scaled(self, factor: float) -> Self:
        """Return the matrix with every weight multiplied by a factor."""
        powers = {name: 2 if name.endswith("_variances") else 1 for name in self.arrays}
        changed: dict[str, Any] = {
            n: a * factor ** powers[n] for n, a in self.arrays.items()
        }
        return dataclasses.replace(self, **changed)

    def equals(self, other: Self) -> bool:
        """Whether bins and all arrays are the same, bit for bit."""
        return (
            self.true_binning == other.true_binning
            and self.reco_binning == other.reco_binning
            and all(
                np.array_equal(a, other.arrays[n], equal_nan=True)
                for n, a in self.arrays.items()
            )
        )

    @property
    def has_equal_bins(self) -> bool:
        """Whether generated and reconstructed bins are the same."""
        return self.true_binning == self.reco_binning

    @property
    def response(self) -> FloatArray:
        """Probability of a reconstructed bin given the true one, shape (T, R).

        ``counts[t, r] / generated[t]``; rows add up to the efficiency.
        """
        return _divide(self.counts, self.generated[:, None])

    @property
    def migration(self) -> FloatArray:
        """The same given that the event is selected, shape (T, R); rows add up to 1."""
        return _divide(self.counts, self.counts.sum(axis=1)[:, None])

    @property
    def efficiency(self) -> FloatArray:
        """Share of a true bin that is selected, shape (T,)."""
        return _divide(self.counts.sum(axis=1), self.generated)

    @property
    def efficiency_error(self) -> FloatArray:
        """Error of the efficiency, shape (T,); passed and missed are independent."""
        passed, failed = self.counts.sum(axis=1), self.missed
        v_passed, v_failed = self.counts_variances.sum(axis=1), self.missed_variances
        variance = _divide(
            failed**2 * v_passed + passed**2 * v_failed, self.generated**4
        )
        return np.sqrt(variance)

    @property
    def purity(self) -> FloatArray:
        """Share of a reconstructed bin that was generated there, shape (R,)."""
        return _divide(np.diagonal(self._square()), self.counts.sum(axis=0))

    @property
    def stability(self) -> FloatArray:
        """Share of the selected events of a true bin that stay there, shape (T,)."""
        return _divide(np.diagonal(self._square()), self.counts.sum(axis=1))

    @property
    def anti_diagonal(self) -> FloatArray:
        """Share of the selected events of a true bin that land in its mirror bin."""
        square = self._square()
        edges = self.true_binning.array
        if not np.allclose(edges, -edges[::-1]):
            msg = "anti-diagonal: bins symmetric about 0 are required"
            raise StudyError(msg)
        return _divide(np.diagonal(square[:, ::-1]), square.sum(axis=1))

    @property
    def singular_values(self) -> FloatArray:
        """Singular values of the response, largest first; NaN if a bin is empty."""
        response = self.response
        if not np.isfinite(response).all():
            return np.full(min(response.shape), np.nan)
        return np.asarray(np.linalg.svd(response, compute_uv=False), np.float64)

    @property
    def condition(self) -> float:
        """Largest over smallest singular value; infinite for a singular response."""
        values = self.singular_values
        return float(values[0] / values[-1]) if values[-1] != 0 else float("inf")

    @property
    def reconstructed(self) -> FloatArray:
        """All selected events per reconstructed bin, shape (R,)."""
        return self.counts.sum(axis=0) + self.from_outside + self.background

    def response_covariance(self, true_bin: int) -> FloatArray:
        """Return the covariance of one row of the response from the simulation.

        Parameters
        ----------
        true_bin : int
            Row.

        Returns
        -------
        array, shape (R, R)
            Weighted multinomial: [d_ij S_i - r_i S_j - S_i r_j + r_i r_j S]/N^2 with S
            the sums of squared weights; rows of different true bins are independent.
        """
        r = self.response[true_bin]
        s = self.counts_variances[true_bin]
        total = self.generated_variances[true_bin]
        cross = np.outer(r, s)
        covariance = np.diag(s) - cross - cross.T + np.outer(r, r) * total
        return covariance / self.generated[true_bin] ** 2

    def data_covariance(self) -> FloatArray:
        """Return the covariance of expected data, shape (R, R): Poisson, diagonal.

        Returns
        -------
        array, shape (R, R)
            Meaningful if the weights were scaled to a luminosity.
        """
        return np.diag(self.reconstructed)

    def replica(self, index: int) -> dict[str, FloatArray]:
        """Return the arrays of one Poisson replica.

        Parameters
        ----------
        index : int
            0 .. N-1.

        Returns
        -------
        dict of array
            ``counts``, ``missed``, ``from_outside``, ``background``; one count per
            event multiplies all of them.
        """
        block = self.replicas[index]
        t = len(self.true_binning)
        return {
            "counts": block[:t, :-1],
            "missed": block[:t, -1],
            "from_outside": block[t, :-1],
            "background": block[t + 1, :-1],
        }

    def _square(self) -> FloatArray:
        if not self.has_equal_bins:
            msg = (
                "migration matrix: equal generated and reconstructed bins are required "
                "for purity, stability and anti-diagonal; got different ones"
            )
            raise StudyError(msg)
        return self.counts

    def __str__(self) -> str:
        t, r = len(self.true_binning), len(self.reco_binning)
        total = self.generated.sum()
        if total == 0:
            return f"migration matrix {t} x {r}, empty"
        share = self.counts.sum() / total
        return f"migration matrix {t} x {r}, {share:.1%} of the generated selected"


def _divide(above: Any, below: Any) -> FloatArray:
    """Quotient, NaN where the denominator vanishes."""
    with np.errstate(invalid="ignore", divide="ignore"):
        out = np.asarray(above, dtype=np.float64) / np.asarray(below, dtype=np.float64)
    return np.where(np.isfinite(out), out, np.nan)


def accumulate(
    table: EventTable,
    selected: NDArray[np.bool_],
    weight: FloatArray,
    options: MigrationOptions | None = None,
) -> MigrationMatrix:
    """Fill the matrix from rows of an event table.

    Parameters
    ----------
    table : EventTable
        Rows.
    selected : array of bool, shape (E,)
        Rows that pass selection, reconstruction and cuts.
    weight : array, shape (E,)
        Weights.
    options : MigrationOptions, optional
        Bins and replicas.

    Returns
    -------
    MigrationMatrix
        Ready to be added to that of other rows.
    """
    options = options or MigrationOptions()
    cell, shape = cells_of(table, selected, options)

    def fill(w: FloatArray) -> FloatArray:
        sums = np.bincount(cell, w, minlength=shape[0] * shape[1])
        return sums.astype(np.float64).reshape(shape)

    replicas = np.zeros((options.replicas, *shape))
    for index in range(options.replicas):
        counts = replica_counts(table["id"], options.seed + index, 1)[0]
        replicas[index] = fill(weight * counts)
    return MigrationMatrix.from_blocks(
        options.true_binning,
        options.reco_binning,
        fill(weight),
        fill(weight**2),
        replicas,
    )


def accumulate_half(
    table: EventTable,
    selected: NDArray[np.bool_],
    weight: FloatArray,
    half: NDArray[np.bool_],
    options: MigrationOptions | None = None,
) -> MigrationMatrix:
    """Fill the matrix from some rows only, without replicas.

    Parameters
    ----------
    table : EventTable
        Rows.
    selected : array of bool, shape (E,)
        Rows that pass selection, reconstruction and cuts.
    weight : array, shape (E,)
        Weights.
    half : array of bool, shape (E,)
        Rows that enter.
    options : MigrationOptions, optional
        Bins.

    Returns
    -------
    MigrationMatrix
        Of these rows.
    """
    options = options or MigrationOptions()
    cell, shape = cells_of(table, selected, options)
    cell, w = cell[half], weight[half]
    size = shape[0] * shape[1]
    blocks = [
        np.bincount(cell, values, minlength=size).astype(np.float64).reshape(shape)
        for values in (w, w**2)
    ]
    return MigrationMatrix.from_blocks(
        options.true_binning, options.reco_binning, *blocks
    )


def cells_of(
    table: EventTable, selected: NDArray[np.bool_], options: MigrationOptions
) -> tuple[NDArray[np.int64], tuple[int, int]]:
    """Return the cell of every row in one block that holds all arrays.

    Parameters
    ----------
    table : EventTable
        Rows.
    selected : array of bool, shape (E,)
        Rows that pass everything.
    options : MigrationOptions
        Bins.

    Returns
    -------
    tuple
        Cells, shape (E,), and the shape (T + 2, R + 1) of the block: T rows of the
        matrix, then from outside, then background; the last column is for events that
        are in no reconstructed bin.
    """
    true_binning, reco_binning = options.true_binning, options.reco_binning
    n_true, n_reco = len(true_binning), len(reco_binning)
    true = table.bins("cos_theta_true", true_binning).astype(np.int64)
    reco = np.where(selected, table.bins("cos_theta_reco", reco_binning), -1)
    inside = table["is_signal"] & (true >= 0)
    row = np.where(inside, true, np.where(table.is_signal_process, n_true, n_true + 1))
    column = np.where(reco >= 0, reco, n_reco)
    return row * (n_reco + 1) + column, (n_true + 2, n_reco + 1)
