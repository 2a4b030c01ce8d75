"""Electroweak inputs and the form factors of the top."""

from __future__ import annotations

import math
from typing import Self

from toprecon.constants import (
    ALPHA_Z,
    B_MASS,
    FERMI_CONSTANT,
    SIN2_THETA_EFFECTIVE,
    TOP_MASS,
    TOP_WIDTH,
    W_MASS,
    W_WIDTH,
    Z_MASS,
    Z_WIDTH,
)
from toprecon.options import Options, option


class ElectroweakInputs(Options):
    """Couplings, masses and widths of a tree-level calculation."""

    alpha: float = option(ALPHA_Z, "electromagnetic coupling", above=0, high=1)
    sin2_theta: float = option(
        SIN2_THETA_EFFECTIVE, "square of the sine of the weak mixing angle", above=0
    )
    fermi_constant: float = option(
        FERMI_CONSTANT, "Fermi constant, for the width of the top", above=0
    )
    z_mass: float = option(Z_MASS, "mass of the Z", unit="GeV", above=0)
    z_width: float = option(Z_WIDTH, "width of the Z", unit="GeV", low=0)
    top_mass: float = option(TOP_MASS, "mass of the top", unit="GeV", above=0)
    top_width: float = option(TOP_WIDTH, "width of the top", unit="GeV", low=0)
    w_mass: float = option(W_MASS, "mass of the W", unit="GeV", above=0)
    w_width: float = option(W_WIDTH, "width of the W", unit="GeV", low=0)
    b_mass: float = option(B_MASS, "mass of the b quark", unit="GeV", low=0)


class FormFactors(Options):
    """Form factors of the vertices of a top pair with a photon and with a Z.

    The vertex is i e {gamma_mu (F1V + gamma5 F1A) + sigma_munu Q^nu / (2 m_t)
    (i F2V + gamma5 F2A)}, with Q the momentum of the pair: F1V + F2V is the magnetic
    coupling. A form factor that is absent has its value at tree level: 2/3 and 0 for
    the photon, (1 - 8/3 s^2)/(4 s c) and -1/(4 s c) for the Z, and no tensor part.
    Real numbers; F2V is CP-even, F2A is CP-odd.
    """

    f1v_photon: float | None = option(None, "vector coupling to the photon")
    f1a_photon: float | None = option(None, "axial coupling to the photon")
    f2v_photon: float = option(0.0, "magnetic coupling to the photon")
    f2a_photon: float = option(0.0, "CP-odd electric dipole coupling to the photon")
    f1v_z: float | None = option(None, "vector coupling to the Z")
    f1a_z: float | None = option(None, "axial coupling to the Z")
    f2v_z: float = option(0.0, "weak magnetic coupling to the Z")
    f2a_z: float = option(0.0, "CP-odd weak dipole coupling to the Z")

    @classmethod
    def standard_model(cls, inputs: ElectroweakInputs | None = None) -> Self:
        """Return the tree-level values, all of them explicit.

        Parameters
        ----------
        inputs : ElectroweakInputs, optional
            Gives the weak mixing angle.

        Returns
        -------
        FormFactors
            No field is absent.

        References
        ----------
        M. S. Amjad et al., arXiv:1307.8102, equations (1) to (4).
        """
        return cls().resolved(inputs)

    def resolved(self, inputs: ElectroweakInputs | None = None) -> Self:
        """Return a copy with absent form factors at their tree-level values.

        Parameters
        ----------
        inputs : ElectroweakInputs, optional
            Gives the weak mixing angle.

        Returns
        -------
        FormFactors
            No field is absent.
        """
        s2 = (inputs or ElectroweakInputs()).sin2_theta
        sc = math.sqrt(s2 * (1 - s2))
        tree = {
            "f1v_photon": 2 / 3,
            "f1a_photon": 0.0,
            "f1v_z": (1 - 8 / 3 * s2) / (4 * sc),
            "f1a_z": -1 / (4 * sc),
        }
        absent = {k: v for k, v in tree.items() if getattr(self, k) is None}
        return self.replace(**absent)

    def shifted(self, inputs: ElectroweakInputs | None = None, **shifts: float) -> Self:
        """Return a copy with amounts added to some form factors.

        Parameters
        ----------
        inputs : ElectroweakInputs, optional
            Gives the weak mixing angle for the values that are absent.
        **shifts : float
            What to add, by name of the form factor.

        Returns
        -------
        FormFactors
            No field is absent.
        """
        start = self.resolved(inputs)
        changed = {
            name: getattr(start, name, 0.0) + shift for name, shift in shifts.items()
        }
        return start.replace(**changed)
