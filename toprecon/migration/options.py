"""Settings of the migration matrix."""

from __future__ import annotations

from typing import Any

from pydantic import field_validator

from toprecon.events import Binning
from toprecon.options import Options, option

DEFAULT_EDGES = tuple(round(-1 + 0.2 * i, 10) for i in range(11))


class MigrationOptions(Options):
    """Bins of the matrix and its replicas."""

    edges: tuple[float, ...] = option(
        DEFAULT_EDGES, "edges of the bins of the generated cos(theta)"
    )
    reco_edges: tuple[float, ...] = option(
        (), "edges of the reconstructed bins; the same as the generated ones if empty"
    )
    replicas: int = option(
        0, "Poisson replicas for the covariance of the simulated response", low=0
    )
    seed: int = option(1, "seed of the replicas", low=0, high=2**32 - 1)

    @field_validator("edges", "reco_edges")
    @classmethod
    def _valid_edges(cls, value: tuple[float, ...], info: Any) -> tuple[float, ...]:
        if info.field_name == "reco_edges" and not value:
            return value
        try:
            binning = Binning(tuple(value))
        except ValueError as error:
            raise ValueError(str(error).removeprefix("edges: ")) from None
        if binning.edges[0] < -1 or binning.edges[-1] > 1:
            msg = f"must lie in [-1, 1], where cos(theta) lies; got {value!r}"
            raise ValueError(msg)
        return binning.edges

    @property
    def true_binning(self) -> Binning:
        """Bins of the generated angle."""
        return Binning(self.edges)

    @property
    def reco_binning(self) -> Binning:
        """Bins of the reconstructed angle."""
        return Binning(self.reco_edges or self.edges)
