"""Truth: what the generated particles say about a reconstruction.

*Takes* Events and an assignment or Tops. *Gives* the assignment of the generated
quarks, the pairing class, the truth phase space and the true charge.
"""

from __future__ import annotations

from toprecon.truth.charges import true_sign
from toprecon.truth.classes import classify
from toprecon.truth.matching import Matching, closest_assignment, hadronic_sides
from toprecon.truth.options import TruthOptions
from toprecon.truth.region import signal_region, sqrt_s_prime

__all__ = [
    "Matching",
    "TruthOptions",
    "classify",
    "closest_assignment",
    "hadronic_sides",
    "signal_region",
    "sqrt_s_prime",
    "true_sign",
]
