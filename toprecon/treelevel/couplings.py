"""Amplitudes of the electron current with the top current, photon and Z added.

Two equivalent forms: chiralities of the top (:func:`chiral_amplitudes`) and form
factors (:func:`vertex`). Everything is per helicity of the electron.
"""

from __future__ import annotations

import dataclasses
import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import OptionError
from toprecon.treelevel.inputs import ElectroweakInputs, FormFactors

ELECTRON_CHARGE = -1.0
TOP_CHARGE = 2.0 / 3.0
ComplexArray = NDArray[np.complex128]


@dataclasses.dataclass(frozen=True)
class Vertex:
    """Effective couplings of the top current for one electron helicity.

    Parameters
    ----------
    vector, axial, tensor, dipole : array of complex
        V, A, T and the CP-odd D, with the propagators and the couplings of the
        electron included, in units of e^2/s; shape of the energies given.
    """

    vector: ComplexArray
    axial: ComplexArray
    tensor: ComplexArray
    dipole: ComplexArray


def electron_sign(helicity: int) -> int:
    """Return -1 for e-L e+R and +1 for e-R e+L.

    Parameters
    ----------
    helicity : Helicity or int
        Pure beams, as their number: -1 or +1.

    Returns
    -------
    int
        The sign of the electron's helicity.

    Raises
    ------
    OptionError
        If the beams are not pure.
    """
    if int(helicity) not in {-1, 1}:
        msg = (
            "helicity: pure beams are required, -1 (e-L e+R) or +1 (e-R e+L); got "
            f"{helicity!r}; use the functions for polarised beams"
        )
        raise OptionError(msg)
    return int(helicity)


def propagator_ratio(sqrt_s: Any, inputs: ElectroweakInputs) -> ComplexArray:
    """Return s / (s - m_Z^2 + i m_Z Gamma_Z), complex, dimensionless."""
    s = np.asarray(sqrt_s, dtype=np.float64) ** 2
    z_mass2 = inputs.z_mass**2
    return s / (s - z_mass2 + 1j * inputs.z_mass * inputs.z_width)


def chiral_amplitudes(
    sqrt_s: Any, helicity: int, inputs: ElectroweakInputs
) -> tuple[ComplexArray, ComplexArray]:
    """Return the amplitudes f_hL and f_hR for the chiralities of the top.

    Parameters
    ----------
    sqrt_s : array
        Energy of the pair [GeV].
    helicity : Helicity or int
        Pure beams.
    inputs : ElectroweakInputs
        Couplings and masses.

    Returns
    -------
    tuple of array
        f_hL and f_hR, complex, in units of e^2/s.
    """
    s2 = inputs.sin2_theta
    c2 = 1 - s2
    electron = s2 if electron_sign(helicity) > 0 else s2 - 0.5
    ratio = propagator_ratio(sqrt_s, inputs)
    photon = ELECTRON_CHARGE * TOP_CHARGE
    left = photon + electron * (0.5 - TOP_CHARGE * s2) / (s2 * c2) * ratio
    right = photon + electron * (-TOP_CHARGE * s2) / (s2 * c2) * ratio
    return left, right


def vertex(
    sqrt_s: Any,
    helicity: int,
    inputs: ElectroweakInputs,
    form_factors: FormFactors | None = None,
) -> Vertex:
    """Return the couplings of the top current for one electron helicity.

    Parameters
    ----------
    sqrt_s : array
        Energy of the pair [GeV].
    helicity : Helicity or int
        Pure beams.
    inputs : ElectroweakInputs
        Couplings and masses.
    form_factors : FormFactors, optional
        Tree level if absent.

    Returns
    -------
    Vertex
        X_h = -F_photon + k_h F_Z for X = V, A, T, D.

    Notes
    -----
    k_h is the Z coupling of the electron times s/(s - m_Z^2 + i m_Z Gamma_Z).
    """
    f = (form_factors or FormFactors()).resolved(inputs)
    s2 = inputs.sin2_theta
    electron = s2 if electron_sign(helicity) > 0 else s2 - 0.5
    k = electron / math.sqrt(s2 * (1 - s2)) * propagator_ratio(sqrt_s, inputs)

    def combine(photon: float | None, z: float | None) -> ComplexArray:
        return ELECTRON_CHARGE * (photon or 0.0) + k * (z or 0.0)

    return Vertex(
        vector=combine(f.f1v_photon, f.f1v_z),
        axial=combine(f.f1a_photon, f.f1a_z),
        tensor=combine(f.f2v_photon, f.f2v_z),
        dipole=combine(f.f2a_photon, f.f2a_z),
    )
