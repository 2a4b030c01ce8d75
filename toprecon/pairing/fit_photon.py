"""Prior of the radiated photon in the constrained fit.

The spectrum of initial-state photons falls like k^(b-1). The map below turns the
photon energy k into a number eta that is normally distributed, so that eta^2 is what
the photon adds to the chi-square (Beckmann, List, List, Nucl. Instrum. Meth. A 624
(2010) 184, arXiv:1006.0436).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from toprecon.constants import ALPHA_ZERO, ELECTRON_MASS

FloatArray = NDArray[np.float64]


def radiator_exponent(sqrt_s: ArrayLike) -> FloatArray:
    """Return b = (2 alpha/pi)(ln(s/m_e^2) - 1) of the leading-logarithm spectrum."""
    logarithm = 2.0 * np.log(np.asarray(sqrt_s, dtype=np.float64) / ELECTRON_MASS)
    return 2.0 * ALPHA_ZERO / math.pi * (logarithm - 1.0)


def photon_pull(
    energy: FloatArray, limit: FloatArray, exponent: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Return the normal variable of a photon energy, and its slope.

    Parameters
    ----------
    energy : array, shape (B,)
        Photon energies k, above 0 [GeV].
    limit : array, shape (B,)
        Largest possible energy, that of a beam [GeV].
    exponent : array, shape (B,)
        Exponent b of the spectrum.

    Returns
    -------
    eta : array, shape (B,)
        sqrt(2) erfinv((k/limit)^b), above 0.
    slope : array, shape (B,)
        d eta/dk [1/GeV]; it diverges for k -> 0, where no photon is the answer.
    """
    from scipy.special import erfinv

    # above the limit there is no photon: hold the map just below its pole
    fraction = np.minimum(energy / limit, 1.0 - 1e-9) ** exponent
    eta = math.sqrt(2.0) * erfinv(fraction)
    slope = math.sqrt(math.pi / 2.0) * np.exp(eta**2 / 2.0) * exponent * fraction
    return eta, slope / energy
