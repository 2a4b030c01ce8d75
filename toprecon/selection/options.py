"""Settings of the selection."""

from __future__ import annotations

import dataclasses
from typing import Self

from pydantic import model_validator

from toprecon.events import Channel
from toprecon.options import Options, option


class SelectionOptions(Options):
    """Which events are reconstructed.

    The default is the reference preselection of the channel: one isolated lepton and
    at least four jets (lepton+jets), no lepton and at least six jets (all-hadronic),
    and the two highest b scores above 0.6 and 0.25.
    """

    n_leptons: int | None = option(
        None, "isolated leptons required; the channel's own number if absent", low=0
    )
    min_lepton_energy: float = option(
        0.0, "leptons below this energy are not counted", unit="GeV", low=0, step=1
    )
    min_jets: int | None = option(
        None, "fewest jets; 4 (lepton+jets) or 6 (all-hadronic) if absent", low=0
    )
    max_jets: int | None = option(None, "most jets; no limit if absent", low=0)
    btag_high: float = option(
        0.6,
        "the highest b score must be above this; 0: no condition",
        low=0,
        high=1,
        step=0.01,
    )
    btag_low: float = option(
        0.25,
        "the second highest b score must be above this; 0: none",
        low=0,
        high=1,
        step=0.01,
    )

    @model_validator(mode="after")
    def _ordered(self) -> Self:
        low, high = self.min_jets, self.max_jets
        if low is not None and high is not None and low > high:
            msg = f"min_jets must not be above max_jets; got {low} and {high}"
            raise ValueError(msg)
        return self

    def requirements(self, channel: Channel) -> Requirements:
        """Return the numbers of objects that a channel requires."""
        leptons, jets = (1, 4) if channel is Channel.LEPTON_JETS else (0, 6)
        return Requirements(
            n_leptons=leptons if self.n_leptons is None else self.n_leptons,
            min_jets=jets if self.min_jets is None else self.min_jets,
            max_jets=self.max_jets,
        )


@dataclasses.dataclass(frozen=True)
class Requirements:
    """Numbers of objects required, with the channel's own numbers filled in."""

    n_leptons: int
    min_jets: int
    max_jets: int | None
