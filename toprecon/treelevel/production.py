"""Cross section and forward-backward asymmetry of top pairs at tree level.

For pure beams (``helicity``) and for polarised ones (``polarised_...``). No
radiation, no QCD: an asymmetry from here is never to be compared with a simulated or
measured one, which radiation lowers by several hundredths.
"""

from __future__ import annotations

import dataclasses
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.constants import HBARC2_FB, N_COLOURS
from toprecon.treelevel.beams import beam_fractions
from toprecon.treelevel.couplings import electron_sign, vertex
from toprecon.treelevel.inputs import ElectroweakInputs, FormFactors

FloatArray = NDArray[np.float64]


@dataclasses.dataclass(frozen=True)
class AngularTerms:
    """Coefficients of 1 + cos^2, 1 - cos^2 and cos in d sigma / d cos(theta) [fb]."""

    transverse: FloatArray
    longitudinal: FloatArray
    linear: FloatArray

    @property
    def total(self) -> FloatArray:
        """Cross section [fb]."""
        return 8 / 3 * self.transverse + 4 / 3 * self.longitudinal

    @property
    def asymmetry(self) -> FloatArray:
        """Forward-backward asymmetry; NaN where the cross section vanishes."""
        with np.errstate(invalid="ignore", divide="ignore"):
            return self.linear / self.total

    def at(self, cos_theta: Any) -> FloatArray:
        """Differential cross section [fb]."""
        c = np.asarray(cos_theta, dtype=np.float64)
        return (
            self.transverse * (1 + c**2)
            + self.longitudinal * (1 - c**2)
            + self.linear * c
        )

    def __add__(self, other: AngularTerms) -> AngularTerms:
        return AngularTerms(
            self.transverse + other.transverse,
            self.longitudinal + other.longitudinal,
            self.linear + other.linear,
        )

    def scaled(self, factor: float) -> AngularTerms:
        """Return the terms times a factor."""
        return AngularTerms(
            self.transverse * factor, self.longitudinal * factor, self.linear * factor
        )


def velocity(sqrt_s: Any, top_mass: float) -> FloatArray:
    """Return the velocity of the tops in the pair frame; 0 below the threshold."""
    s = np.asarray(sqrt_s, dtype=np.float64) ** 2
    return np.sqrt(np.maximum(1 - 4 * top_mass**2 / s, 0.0))


def angular_terms(
    sqrt_s: Any,
    helicity: int,
    inputs: ElectroweakInputs | None = None,
    form_factors: FormFactors | None = None,
) -> AngularTerms:
    """Return the three coefficients of the angular distribution for pure beams.

    Parameters
    ----------
    sqrt_s : array
        Energy of the pair [GeV].
    helicity : Helicity or int
        -1 (e-L e+R) or +1 (e-R e+L).
    inputs : ElectroweakInputs, optional
        Couplings and masses.
    form_factors : FormFactors, optional
        Tree level if absent.

    Returns
    -------
    AngularTerms
        In fb; zero below the threshold.

    Notes
    -----
    With G = V + T for transverse and V/gamma + gamma T for longitudinal currents:
    (N_c pi alpha^2 beta / s) {(1 + c^2)(|G|^2 + beta^2 |A|^2) + (1 - c^2)(|V/gamma +
    gamma T|^2 + beta^2 gamma^2 |D|^2) + 4 eta beta c Re(G A*)}, eta = -1, +1 for
    left- and right-handed electrons.

    References
    ----------
    M. S. Amjad et al., arXiv:1307.8102; J. Fleischer et al., hep-ph/0302259.
    """
    inputs = inputs or ElectroweakInputs()
    energy = np.asarray(sqrt_s, dtype=np.float64)
    eta = electron_sign(helicity)
    x = vertex(energy, helicity, inputs, form_factors)
    beta = velocity(energy, inputs.top_mass)
    gamma = energy / (2 * inputs.top_mass)
    unit = N_COLOURS * np.pi * inputs.alpha**2 * beta / energy**2 * HBARC2_FB
    magnetic = x.vector + x.tensor
    electric = x.vector / gamma + gamma * x.tensor
    return AngularTerms(
        transverse=unit * (np.abs(magnetic) ** 2 + beta**2 * np.abs(x.axial) ** 2),
        longitudinal=unit
        * (np.abs(electric) ** 2 + (beta * gamma) ** 2 * np.abs(x.dipole) ** 2),
        linear=unit * 4 * eta * beta * np.real(magnetic * np.conj(x.axial)),
    )


def polarised_terms(
    sqrt_s: Any,
    electron_polarisation: float,
    positron_polarisation: float,
    inputs: ElectroweakInputs | None = None,
    form_factors: FormFactors | None = None,
) -> AngularTerms:
    """Return the three coefficients of the angular distribution for polarised beams.

    Parameters
    ----------
    sqrt_s : array
        Energy of the pair [GeV].
    electron_polarisation, positron_polarisation : float
        In [-1, 1]; > 0 is right-handed.
    inputs : ElectroweakInputs, optional
        Couplings and masses.
    form_factors : FormFactors, optional
        Tree level if absent.

    Returns
    -------
    AngularTerms
        In fb.
    """
    left, right = beam_fractions(electron_polarisation, positron_polarisation)
    lr = angular_terms(sqrt_s, -1, inputs, form_factors)
    rl = angular_terms(sqrt_s, 1, inputs, form_factors)
    return lr.scaled(left) + rl.scaled(right)


def cross_section(
    sqrt_s: Any,
    helicity: int,
    inputs: ElectroweakInputs | None = None,
    form_factors: FormFactors | None = None,
) -> FloatArray:
    """Return the cross section for pure beams [fb]; 0 below the threshold.

    Parameters
    ----------
    sqrt_s : array
        Energy of the pair [GeV].
    helicity : Helicity or int
        -1 (e-L e+R) or +1 (e-R e+L).
    inputs : ElectroweakInputs, optional
        Couplings and masses.
    form_factors : FormFactors, optional
        Tree level if absent.

    Returns
    -------
    array
        Cross section [fb].

    Examples
    --------
    >>> round(float(cross_section(500, -1)), 1)
    1564.4
    """
    return angular_terms(sqrt_s, helicity, inputs, form_factors).total


def differential_cross_section(
    cos_theta: Any,
    sqrt_s: Any,
    helicity: int,
    inputs: ElectroweakInputs | None = None,
    form_factors: FormFactors | None = None,
) -> FloatArray:
    """Return d sigma / d cos(theta) for pure beams [fb].

    Parameters
    ----------
    cos_theta : array
        Angle of the top to the electron beam in the pair frame.
    sqrt_s : array
        Energy of the pair [GeV].
    helicity : Helicity or int
        -1 (e-L e+R) or +1 (e-R e+L).
    inputs : ElectroweakInputs, optional
        Couplings and masses.
    form_factors : FormFactors, optional
        Tree level if absent.

    Returns
    -------
    array
        Differential cross section [fb].
    """
    return angular_terms(sqrt_s, helicity, inputs, form_factors).at(cos_theta)


def forward_backward_asymmetry(
    sqrt_s: Any,
    helicity: int,
    inputs: ElectroweakInputs | None = None,
    form_factors: FormFactors | None = None,
) -> FloatArray:
    """Return the forward-backward asymmetry for pure beams.

    Parameters
    ----------
    sqrt_s : array
        Energy of the pair [GeV].
    helicity : Helicity or int
        -1 (e-L e+R) or +1 (e-R e+L).
    inputs : ElectroweakInputs, optional
        Couplings and masses.
    form_factors : FormFactors, optional
        Tree level if absent.

    Returns
    -------
    array
        In [-3/4, 3/4]; NaN at and below the threshold.

    Examples
    --------
    >>> round(float(forward_backward_asymmetry(500, -1)), 4)
    0.3823
    """
    return angular_terms(sqrt_s, helicity, inputs, form_factors).asymmetry


def mean_helicity(
    sqrt_s: Any, helicity: int, inputs: ElectroweakInputs | None = None
) -> FloatArray:
    """Return the mean helicity of the tops for pure beams, over all angles.

    Parameters
    ----------
    sqrt_s : array
        Energy of the pair [GeV].
    helicity : Helicity or int
        -1 (e-L e+R) or +1 (e-R e+L).
    inputs : ElectroweakInputs, optional
        Couplings and masses.

    Returns
    -------
    array
        Right-handed minus left-handed share; the share of right-handed tops is
        (1 + value)/2. NaN below the threshold.

    Notes
    -----
    (8/3) 2 beta Re(V A*) over the bracket of :func:`angular_terms`: opposite
    helicities t_R tbar_L and t_L tbar_R go with |V + beta A|^2 and |V - beta A|^2.
    """
    inputs = inputs or ElectroweakInputs()
    terms = angular_terms(sqrt_s, helicity, inputs)
    with np.errstate(invalid="ignore", divide="ignore"):
        return electron_sign(helicity) * 4 / 3 * terms.linear / terms.total
