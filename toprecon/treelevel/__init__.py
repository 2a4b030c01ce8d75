"""Tree-level predictions: what the generated distributions should be.

Takes: energy, beam helicity or polarisations, couplings and masses.
Gives: cross sections [fb], asymmetries, decay distributions and widths.
"""

from __future__ import annotations

from toprecon.treelevel.beams import beam_fractions
from toprecon.treelevel.couplings import Vertex, chiral_amplitudes, vertex
from toprecon.treelevel.decay import (
    HelicityFractions,
    analysing_power,
    b_momentum,
    helicity_angle_density,
    largest_lepton_b_mass,
    mean_lepton_energy,
    top_width,
    w_helicity_fractions,
    width_correction,
)
from toprecon.treelevel.inputs import ElectroweakInputs, FormFactors
from toprecon.treelevel.production import (
    AngularTerms,
    angular_terms,
    cross_section,
    differential_cross_section,
    forward_backward_asymmetry,
    mean_helicity,
    polarised_terms,
    velocity,
)
from toprecon.treelevel.radiation import (
    mean_kept_fraction,
    radiation_exponent,
    structure_function,
)

__all__ = [
    "AngularTerms",
    "ElectroweakInputs",
    "FormFactors",
    "HelicityFractions",
    "Vertex",
    "analysing_power",
    "angular_terms",
    "b_momentum",
    "beam_fractions",
    "chiral_amplitudes",
    "cross_section",
    "differential_cross_section",
    "forward_backward_asymmetry",
    "helicity_angle_density",
    "largest_lepton_b_mass",
    "mean_helicity",
    "mean_kept_fraction",
    "mean_lepton_energy",
    "polarised_terms",
    "radiation_exponent",
    "structure_function",
    "top_width",
    "velocity",
    "vertex",
    "w_helicity_fractions",
    "width_correction",
]
