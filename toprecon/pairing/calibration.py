"""What calibration found: plain numbers that belong to the plan."""

from __future__ import annotations

from typing import Self

import numpy as np
from numpy.typing import NDArray
from pydantic import model_validator

from toprecon.events import Channel
from toprecon.options import Options, option
from toprecon.pairing.densities import Mixture
from toprecon.pairing.likelihoods import ChargeLikelihood, TagLikelihood
from toprecon.pairing.names import TermName, TermOptions

FloatArray = NDArray[np.float64]

ENERGIES = frozenset({TermName.TOP_ENERGY, TermName.LEPTONIC_TOP_ENERGY})
COSINES = frozenset({TermName.B_W_ANGLE, TermName.LEPTONIC_B_W_ANGLE})
LEAST = 1.0  # GeV; smaller masses and momenta count as this
CLOSEST = 1e-4  # smallest 1 - cos(b, W)


class Calibration(Options):
    """Densities of right and wrong assignments at one collision energy.

    Lepton+jets: of all ``names`` together. All-hadronic: of those of one side.
    """

    channel: Channel = option(Channel.LEPTON_JETS, "decay channel")
    sqrt_s: float = option(500.0, "collision energy", unit="GeV", above=0)
    names: tuple[TermName, ...] = option(..., "quantities of the densities, in order")
    terms: tuple[TermOptions, ...] = option(
        (), "targets and two-sided resolutions of right assignments"
    )
    gaussian: Mixture = option(..., "mean and covariance of right assignments")
    right: Mixture = option(..., "density of right assignments")
    wrong: Mixture = option(..., "density of wrong assignments")
    tag: TagLikelihood = option(None, "b scores", factory=TagLikelihood)
    charge: ChargeLikelihood = option(
        None, "charges of b jets", factory=ChargeLikelihood
    )
    n_right: int = option(0, "right assignments used", low=0)
    n_wrong: int = option(0, "wrong assignments used", low=0)

    @model_validator(mode="after")
    def _fitting(self) -> Self:
        if list(self.names) != [name for name in TermName if name in self.names]:
            msg = (
                "names must be different and in the order of the terms; got "
                f"{', '.join(self.names)}"
            )
            raise ValueError(msg)
        for name in ("gaussian", "right", "wrong"):
            size = getattr(self, name).n_dimensions
            if size != len(self.names):
                msg = (
                    f"{name} must have one dimension per name; got {size} for "
                    f"{len(self.names)} names"
                )
                raise ValueError(msg)
        return self


def transformed(name: TermName, value: FloatArray, sqrt_s: FloatArray) -> FloatArray:
    """Return a quantity on the scale on which its density is nearly normal.

    Parameters
    ----------
    name : TermName
        Quantity.
    value : array, shape (..., E)
        Its values.
    sqrt_s : array, shape (E,)
        Collision energies [GeV].

    Returns
    -------
    array, shape (..., E)
        ln(m/GeV) of masses and momenta, E/sqrt(s), sqrt(1 - cos) of angles.
    """
    if name in ENERGIES:
        return value / sqrt_s
    if name in COSINES:
        return np.sqrt(np.maximum(1.0 - value, CLOSEST))
    return np.log(np.maximum(value, LEAST))
