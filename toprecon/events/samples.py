"""What is known of a sample as a whole: process, beams, cross section, sum of weights."""

from __future__ import annotations

import dataclasses
import math
from typing import Any, Self

from toprecon.errors import InputError
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
        Entries found in the files or generated, rejected ones included.
    sum_of_weights : float
        Sum of generator weights over these entries, rejected ones included.
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

    @property
    def _is_complete(self) -> bool:
        """Whether all events generated are among the entries."""
        return self.entries == self.generated

    def is_same_as(self, other: Sample) -> bool:
        """Whether two descriptions can be of parts of one sample.

        Parameters
        ----------
        other : Sample
            Another description.

        Returns
        -------
        bool
            Whether everything that is said of the whole sample agrees. What was
            generated may differ if both parts hold all of theirs.
        """
        counts: dict[str, Any] = {"entries": 0, "sum_of_weights": 0.0}
        if self._is_complete and other._is_complete:
            counts["generated"] = -1
        return (
            self.replace(**counts).to_mapping() == other.replace(**counts).to_mapping()
        )

    def merged(self, other: Sample) -> Self:
        """Return the description of two parts of one sample together.

        Parameters
        ----------
        other : Sample
            The same sample, other entries.

        Returns
        -------
        Sample
            Entries and sums of weights are added. ``generated`` is added for parts
            that hold all of theirs (made by the generator in chunks); parts of a
            larger sample state the same number, which is kept.

        Raises
        ------
        InputError
            If the descriptions disagree.
        """
        if not self.is_same_as(other):
            mine, theirs = self.to_mapping(), other.to_mapping()
            names = [
                key
                for key in dict.fromkeys([*mine, *theirs])
                if mine.get(key) != theirs.get(key)
                and key not in {"entries", "sum_of_weights"}
            ]
            differences = ", ".join(
                f"{key} {mine.get(key)!r} and {theirs.get(key)!r}" for key in names
            )
            msg = (
                f"sample {self.name!r}: its parts must be described alike; got "
                f"{differences}; give different samples different names"
            )
            raise InputError(msg)
        both = self._is_complete and other._is_complete
        return self.replace(
            generated=self.generated + other.generated if both else self.generated,
            entries=self.entries + other.entries,
            sum_of_weights=self.sum_of_weights + other.sum_of_weights,
        )

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
