"""Ways to the neutrino momentum, given the lepton and what is missing."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from toprecon.kinematics import mass
from toprecon.pairing.options import NeutrinoMethod

FloatArray = NDArray[np.float64]


def neutrino_momentum(
    lepton: FloatArray, missing: FloatArray, method: NeutrinoMethod, w_mass: float
) -> FloatArray:
    """Return the neutrino momentum.

    Parameters
    ----------
    lepton : array, shape (4, E)
        Lepton [GeV].
    missing : array, shape (4, E)
        Missing energy and momentum [GeV].
    method : NeutrinoMethod
        ``w_mass`` takes the root nearer to the missing p_z.
    w_mass : float
        Mass of the W [GeV].

    Returns
    -------
    array, shape (4, E)
        Massless; NaN where there is none.
    """
    _, px, py, pz = missing
    if method is NeutrinoMethod.W_MASS:
        one, two = w_mass_roots(lepton, px, py, w_mass)
        return _massless(px, py, np.where(abs(one - pz) < abs(two - pz), one, two))
    if method is NeutrinoMethod.ISR:
        return after_photon(lepton, missing, w_mass)
    return _massless(px, py, pz)


def w_mass_roots(
    lepton: FloatArray, px: FloatArray, py: FloatArray, w_mass: float
) -> tuple[FloatArray, FloatArray]:
    """Return both p_z for which a massless lepton and neutrino have the W mass.

    Parameters
    ----------
    lepton : array, shape (4, E)
        Lepton [GeV].
    px, py : array, shape (E,)
        Transverse momentum of the neutrino [GeV].
    w_mass : float
        Mass of the W [GeV].

    Returns
    -------
    larger, smaller : array, shape (E,)
        Roots [GeV]; where they are complex (transverse mass above the W mass) both are
        their real part. NaN for a lepton along the beam.

    References
    ----------
    CDF Collaboration, Phys. Rev. D 50 (1994) 2966: the quadratic and the real part
    of complex roots (from memory).
    """
    _, lx, ly, lz = lepton
    with np.errstate(invalid="ignore", divide="ignore"):
        pt2 = lx**2 + ly**2
        mu = 0.5 * w_mass**2 + lx * px + ly * py
        centre = mu * lz / pt2
        square = centre**2 - ((pt2 + lz**2) * (px**2 + py**2) - mu**2) / pt2
        half = np.sqrt(np.where(square > 0, square, 0.0))
        centre = np.where(pt2 > 0, centre, np.nan)
    return centre + half, centre - half


def after_photon(lepton: FloatArray, missing: FloatArray, w_mass: float) -> FloatArray:
    """Return the neutrino if one photon along the beam carries the rest.

    Parameters
    ----------
    lepton, missing : array, shape (4, E)
        Lepton, missing energy and momentum [GeV].
    w_mass : float
        Mass of the W [GeV]; decides which beam radiated.

    Returns
    -------
    array, shape (4, E)
        With (E - k)^2 = p_T^2 + (p_z -+ k)^2, the photon has k = m^2/(2 (E -+ p_z))
        for missing mass m. If m^2 or E is not positive there is no photon, and
        the neutrino is massless with the missing momentum.
    """
    energy, px, py, pz = missing
    m2 = energy**2 - px**2 - py**2 - pz**2
    candidates = []
    for direction in (1.0, -1.0):
        with np.errstate(invalid="ignore", divide="ignore"):
            k = m2 / (2.0 * (energy - direction * pz))
        k = np.where((m2 > 0) & (energy > 0), k, 0.0)
        candidates.append(_massless(px, py, pz - direction * k))
    with np.errstate(invalid="ignore"):
        off = [np.abs(mass(lepton + nu) - w_mass) for nu in candidates]
    first = np.nan_to_num(off[0], nan=np.inf) <= np.nan_to_num(off[1], nan=np.inf)
    return np.where(first, candidates[0], candidates[1])


def _massless(px: FloatArray, py: FloatArray, pz: FloatArray) -> FloatArray:
    """Return the momentum of a massless particle, shape (4, E)."""
    return np.stack([np.sqrt(px**2 + py**2 + pz**2), px, py, pz])
