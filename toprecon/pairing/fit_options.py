"""Settings of the constrained fit: constraints, resolutions, iteration.

The default resolutions are those of Durham jets against quarks before gluon
radiation, in simulated top pairs at 500 GeV: half the central 68 % interval of
matched jets. They hold the effect of radiation and of lost neutrinos, not only that
of a detector, and have to be measured anew for other samples. The softness of the
constraints stands for what such resolutions leave out (particles clustered into the
wrong jet, natural widths, beam spread); it was chosen for the best top direction.
"""

from __future__ import annotations

from enum import StrEnum
from typing import Self

import numpy as np
from numpy.typing import NDArray
from pydantic import model_validator

from toprecon.constants import TOP_MASS, W_MASS
from toprecon.options import Options, option

FloatArray = NDArray[np.float64]


class TopMasses(StrEnum):
    """What is demanded of the two top masses."""

    FREE = "free"
    EQUAL = "equal"
    FIXED = "fixed"


class JetResolution(Options):
    """Resolution of jets: noise/E, stochastic/sqrt(E) and constant in quadrature."""

    response: float = option(
        1.0, "mean measured over true energy; energies are divided by it", above=0
    )
    energy_noise: float = option(
        0.0, "part of sigma(E)/E that falls like 1/E", unit="GeV", low=0
    )
    energy_stochastic: float = option(
        0.0, "part of sigma(E)/E that falls like 1/sqrt(E)", unit="GeV^0.5", low=0
    )
    energy_constant: float = option(0.0, "constant part of sigma(E)/E", low=0)
    angle_noise: float = option(
        0.0, "part of the angular resolution that falls like 1/E", unit="GeV", low=0
    )
    angle_stochastic: float = option(
        0.0,
        "part of the angular resolution that falls like 1/sqrt(E)",
        unit="GeV^0.5",
        low=0,
    )
    angle_constant: float = option(
        0.0, "constant part of the angular resolution", unit="rad", low=0
    )

    @model_validator(mode="after")
    def _not_perfect(self) -> Self:
        energy = self.energy_noise + self.energy_stochastic + self.energy_constant
        angle = self.angle_noise + self.angle_stochastic + self.angle_constant
        for name, value in (("energy", energy), ("angle", angle)):
            if value <= 0:
                msg = f"one of the {name} resolutions must be > 0; got only zeros"
                raise ValueError(msg)
        return self

    def energy_error(self, energy: FloatArray) -> FloatArray:
        """Return the resolution of an energy [GeV]."""
        return np.sqrt(
            self.energy_noise**2
            + self.energy_stochastic**2 * energy
            + (self.energy_constant * energy) ** 2
        )

    def angle_error(self, energy: FloatArray) -> FloatArray:
        """Return the resolution of a direction, in either direction across it [rad]."""
        return np.sqrt(
            (self.angle_noise / energy) ** 2
            + self.angle_stochastic**2 / energy
            + self.angle_constant**2
        )


class LeptonResolution(Options):
    """Resolution of the lepton: constant and proportional part in quadrature."""

    energy_constant: float = option(0.01, "constant part of sigma(E)/E", low=0)
    energy_linear: float = option(
        2e-4, "part of sigma(E)/E proportional to E", unit="GeV^-1", low=0
    )
    angle: float = option(0.005, "resolution of the direction", unit="rad", above=0)

    @model_validator(mode="after")
    def _not_perfect(self) -> Self:
        if self.energy_constant + self.energy_linear <= 0:
            msg = "one of the energy resolutions must be > 0; got only zeros"
            raise ValueError(msg)
        return self

    def energy_error(self, energy: FloatArray) -> FloatArray:
        """Return the resolution of an energy [GeV]."""
        return energy * np.hypot(self.energy_constant, self.energy_linear * energy)

    def angle_error(self, energy: FloatArray) -> FloatArray:
        """Return the resolution of a direction, in either direction across it [rad]."""
        return np.full_like(energy, self.angle)


def _light_jet() -> JetResolution:
    return JetResolution(response=0.983, energy_stochastic=0.70, angle_noise=2.3)


def _b_jet() -> JetResolution:
    return JetResolution(
        response=0.968, energy_noise=3.0, energy_constant=0.11, angle_noise=1.8
    )


class FitOptions(Options):
    """Settings of the constrained kinematic fit."""

    on: bool = option(False, "whether the kept assignments are refined by the fit")
    four_momentum: bool = option(
        True, "energy and momentum of the pair (and photon) are those of the beams"
    )
    w_masses: bool = option(True, "both W candidates have the W mass")
    top_masses: TopMasses = option(
        TopMasses.EQUAL, "masses of the candidates: free, equal, or fixed to top_mass"
    )
    w_mass: float = option(W_MASS, "mass of the W", unit="GeV", above=0)
    top_mass: float = option(TOP_MASS, "mass of the top", unit="GeV", above=0)
    w_width: float = option(
        8.0, "Gaussian softness of each W mass; 0 is exact", unit="GeV", low=0
    )
    top_width: float = option(
        8.0, "Gaussian softness of each top mass; 0 is exact", unit="GeV", low=0
    )
    energy_width: float = option(
        8.0, "Gaussian softness of the energy balance; 0 is exact", unit="GeV", low=0
    )
    isr: bool = option(
        True,
        "one photon along a beam, with the radiator as its prior; needs four_momentum",
    )
    isr_gain: float = option(
        2.0, "chi-square by which a photon must improve on none to be taken", low=0
    )
    crossing_angle: float = option(
        0.0,
        "angle between the beams, in the horizontal plane, if not undone on reading",
        unit="rad",
        low=0,
        high=0.2,
    )
    jet: JetResolution = option(None, "jets of the W decays", factory=_light_jet)
    b_jet: JetResolution = option(None, "jets of b quarks", factory=_b_jet)
    lepton: LeptonResolution = option(
        None, "electrons and muons", factory=LeptonResolution
    )
    max_iterations: int = option(30, "steps after which a fit is given up", low=1)
    full_steps: int = option(
        3, "full steps before their length adapts, which stops oscillations", low=0
    )
    tolerance: float = option(
        1e-3, "largest violation of a constraint at convergence", unit="GeV", above=0
    )
    chi2_tolerance: float = option(
        1e-3, "largest last change of the chi-square at convergence", above=0
    )

    @model_validator(mode="after")
    def _some_constraint(self) -> Self:
        if (
            not self.four_momentum
            and not self.w_masses
            and self.top_masses is TopMasses.FREE
        ):
            msg = (
                "at least one of four_momentum, w_masses, top_masses must constrain; "
                "got none; switch one on"
            )
            raise ValueError(msg)
        return self
