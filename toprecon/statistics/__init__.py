"""Numbers with errors: measured values, linear error propagation, A_FB from counts.

Plain arrays in and out; nothing here knows about events.
"""

from __future__ import annotations

from toprecon.statistics.counting import (
    asymmetry_from_counts,
    fraction_from_counts,
    weighted_share,
)
from toprecon.statistics.linear import Estimate, ratio
from toprecon.statistics.measured import Measured, plain_number
from toprecon.statistics.spectrum import asymmetry_from_spectrum, asymmetry_of_spectrum
from toprecon.statistics.templates import TemplateFit, fit_templates

__all__ = [
    "Estimate",
    "Measured",
    "TemplateFit",
    "asymmetry_from_counts",
    "asymmetry_from_spectrum",
    "asymmetry_of_spectrum",
    "fit_templates",
    "fraction_from_counts",
    "plain_number",
    "ratio",
    "weighted_share",
]
