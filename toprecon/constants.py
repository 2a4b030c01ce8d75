"""Physical constants: value, unit and source on the line.

Masses and couplings that a user may want to change are options of the step that
uses them (their defaults come from here); these are the values nobody edits.
"""

from __future__ import annotations

from typing import Final

TOP_MASS: Final = 172.5  # GeV, common choice of simulated samples
W_MASS: Final = 80.379  # GeV, Review of Particle Physics 2020
B_MASS: Final = 4.78  # GeV, pole mass, Review of Particle Physics 2020
Z_MASS: Final = 91.1876  # GeV, Review of Particle Physics 2020
Z_WIDTH: Final = 2.4952  # GeV, Review of Particle Physics 2020
W_WIDTH: Final = 2.085  # GeV, Review of Particle Physics 2020
TOP_WIDTH: Final = 1.42  # GeV, Review of Particle Physics 2024
ELECTRON_MASS: Final = 0.51099895e-3  # GeV, CODATA 2018

ALPHA_ZERO: Final = 1 / 137.035999  # at zero momentum transfer, CODATA 2018
ALPHA_Z: Final = 1 / 127.95  # at the Z mass, MS-bar, Review of Particle Physics
SIN2_THETA_EFFECTIVE: Final = 0.23155  # leptonic effective mixing angle, same review
ALPHA_STRONG_Z: Final = 0.1180  # strong coupling at the Z mass, same review
FERMI_CONSTANT: Final = 1.1663788e-5  # GeV^-2, Review of Particle Physics

HBARC2_FB: Final = 0.3893793721e12  # fb GeV^2, CODATA 2018
N_COLOURS: Final = 3

# Branching fractions of the W, Review of Particle Physics
W_TO_HADRONS: Final = 0.6741
W_TO_ONE_LEPTON: Final = 0.1086
