"""What is known of a sample as a whole: process, beams, cross section, sum of weights."""

from __future__ import annotations

import dataclasses
import math
from typing import Any, Self

from toprecon.events.enums import Helicity

SIGNAL_PROCESS = "ttbar"


@dataclasses.dataclass(frozen=True)
class Sample:
    """One sample of events.

    Parameters
    ----------
    name : str
        Unique within a study.
    process : str
        ``"ttbar"`` for the signal, any other name for a background.
    helicity : Helicity
        Pure beams, or ``MIXED`` with the polarisations below.
    sqrt_s : float
        Nominal collision energy [GeV].
    cross_section_lr, cross_section_rl : float
        Cross section for pure e-L e+R and e-R e+L beams [fb]; NaN if not known.
    cross_section : float
        Cross section of a ``MIXED`` sample as it was generated [fb]; NaN if not known.
    electron_polarisation, positron_polarisation : float
        Stated polarisations of a ``MIXED`` sample (P > 0 is right-handed).
    generated : int
        Events generated, before any filter; -1 if not known.
    entries : int
        Entries found in the files, rejected ones included.
    sum_of_weights : float
        Sum of generator weights over the entries read, rejected ones included.
    stated_sum_of_weights : float
        The same for the whole sample as a catalogue states it, which also counts
        events dropped before the file was written; NaN if not stated.
    """

    name: str
    process: str = SIGNAL_PROCESS
    helicity: Helicity = Helicity.MIXED
    sqrt_s: float = math.nan
    cross_section_lr: float = math.nan
    cross_section_rl: float = math.nan
    cross_section: float = math.nan
    electron_polarisation: float = 0.0
    positron_polarisation: float = 0.0
    generated: int = -1
    entries: int = 0
    sum_of_weights: float = 0.0
    stated_sum_of_weights: float = math.nan

    @property
    def normalisation(self) -> float:
        """Sum of weights that stands for the whole sample."""
        if math.isnan(self.stated_sum_of_weights):
            return self.sum_of_weights
        return self.stated_sum_of_weights

    @property
    def is_signal_process(self) -> bool:
        """Whether the sample is top-pair production."""
        return self.process == SIGNAL_PROCESS

    def replace(self, **changes: Any) -> Self:
        """Return a copy with some fields changed."""
        return dataclasses.replace(self, **changes)

    def to_mapping(self) -> dict[str, Any]:
        """Return plain data; unknown numbers are left out."""
        data = dataclasses.asdict(self)
        data["helicity"] = self.helicity.name
        return {
            key: value
            for key, value in data.items()
            if not (isinstance(value, float) and math.isnan(value))
        }

    @classmethod
    def from_mapping(cls, data: dict[str, Any]) -> Self:
        """Return the sample described by :meth:`to_mapping`."""
        return cls(**{**data, "helicity": Helicity[data["helicity"]]})
