"""A number with its error, printed to the digits the error allows."""

from __future__ import annotations

import dataclasses
import math


@dataclasses.dataclass(frozen=True)
class Measured:
    """A value and its standard deviation; NaN means missing.

    Parameters
    ----------
    value : float
        The number.
    error : float
        Its statistical standard deviation.
    """

    value: float
    error: float

    @property
    def digits(self) -> int:
        """Digits after the point that two digits of the error allow."""
        if not math.isfinite(self.error) or self.error < 1e-9:  # rounding, no error
            return 4
        return min(10, max(0, 1 - math.floor(math.log10(self.error))))

    def __str__(self) -> str:
        if math.isnan(self.value):
            return "missing"
        if math.isnan(self.error):
            return f"{self.value:.4f} +- missing"
        return f"{self.value:.{self.digits}f} +- {self.error:.{self.digits}f}"

    def to_mapping(self) -> dict[str, float | None]:
        """Return plain data; a missing number is ``None``."""
        return {
            "value": plain_number(self.value),
            "error": plain_number(self.error),
        }


def plain_number(value: float) -> float | None:
    """Return a number for plain data, or ``None`` if it is missing or infinite."""
    return float(value) if math.isfinite(value) else None
