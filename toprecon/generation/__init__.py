"""Generated events: top pairs with truth, and what a detector sees of them.

Takes: GenerationOptions, a number of events and a seed.
Gives: Events with truth; weights for other couplings or another angular law.
"""

from __future__ import annotations

from toprecon.generation.amplitudes import (
    angle_weights,
    coupling_weights,
    matrix_element,
)
from toprecon.generation.detector_options import DetectorOptions
from toprecon.generation.generator import describe, generate
from toprecon.generation.options import (
    Decays,
    Flavour,
    GenerationOptions,
    Process,
    Simulation,
)
from toprecon.generation.particles import ParticleKind
from toprecon.generation.rates import pair_cross_section_with_radiation
from toprecon.generation.response_options import ResponseOptions

__all__ = [
    "Decays",
    "DetectorOptions",
    "Flavour",
    "GenerationOptions",
    "ParticleKind",
    "Process",
    "ResponseOptions",
    "Simulation",
    "angle_weights",
    "coupling_weights",
    "describe",
    "generate",
    "matrix_element",
    "pair_cross_section_with_radiation",
]
