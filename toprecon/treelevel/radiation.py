"""Photon radiation of a beam before the collision, in leading logarithms."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.constants import ALPHA_ZERO, ELECTRON_MASS

FloatArray = NDArray[np.float64]


def radiation_exponent(sqrt_s: float, alpha: float = ALPHA_ZERO) -> float:
    """Return beta_e = (2 alpha/pi)(ln(s/m_e^2) - 1), about 0.12 at 500 GeV.

    Parameters
    ----------
    sqrt_s : float
        Energy of the collision [GeV].
    alpha : float
        Electromagnetic coupling; the radiated photons are real, so that of zero
        momentum transfer.

    Returns
    -------
    float
        The exponent.
    """
    return 2 * alpha / math.pi * (2 * math.log(sqrt_s / ELECTRON_MASS) - 1)


def structure_function(loss: Any, exponent: float) -> FloatArray:
    """Return the density of the energy fraction that a beam keeps.

    Parameters
    ----------
    loss : array
        1 - x, above 0 and below 1; x is the fraction kept. The loss and not x,
        because half of all beams keep all but 1e-5 of their energy.
    exponent : float
        Of :func:`radiation_exponent`.

    Returns
    -------
    array
        D(x), integral 1 up to the third order.

    References
    ----------
    E. A. Kuraev, V. S. Fadin, Sov. J. Nucl. Phys. 41 (1985) 466; M. Skrzypek, S.
    Jadach, Z. Phys. C49 (1991) 577: exponentiated, second order.
    """
    y = np.asarray(loss, dtype=np.float64)
    return soft_density(y, exponent) * (
        _soft_normalisation(exponent) + _hard_part(y, exponent)
    )


def soft_density(loss: Any, exponent: float) -> FloatArray:
    """Return (beta/2) (1-x)^(beta/2-1), of which (1-x) = u^(2/beta) is a sample."""
    y = np.asarray(loss, dtype=np.float64)
    return exponent / 2 * y ** (exponent / 2 - 1)


def radiation_weight(loss: Any, exponent: float) -> FloatArray:
    """Return the structure function divided by :func:`soft_density`.

    Parameters
    ----------
    loss : array
        1 - x.
    exponent : float
        Of :func:`radiation_exponent`.

    Returns
    -------
    array
        At most :func:`largest_radiation_weight`, near 1 for a vanishing loss.
    """
    y = np.asarray(loss, dtype=np.float64)
    return _soft_normalisation(exponent) + _hard_part(y, exponent)


def largest_radiation_weight(exponent: float) -> float:
    """Return an upper limit of :func:`radiation_weight`, reached for soft photons."""
    # the second order exceeds the soft limit by 5e-9 near a loss of 1e-8
    return _soft_normalisation(exponent) * (1 + 1e-7)


def mean_kept_fraction(exponent: float) -> float:
    """Return <x> = exp(-beta/3), exact in leading logarithms."""
    return math.exp(-exponent / 3)


def _soft_normalisation(exponent: float) -> float:
    half = exponent / 2
    return math.exp(-np.euler_gamma * half + 0.75 * half) / math.gamma(1 + half)


def _hard_part(y: FloatArray, exponent: float) -> FloatArray:
    """Return the terms without the soft singularity, over the soft density."""
    x = 1 - y
    tiny = np.finfo(float).tiny
    log_x = np.log1p(-np.minimum(y, 1 - 1e-300))
    log_y = np.log(np.maximum(y, tiny))
    # ln(x)/(1-x) -> -1 for a vanishing loss
    ratio = np.where(y > 1e-8, log_x / np.maximum(y, tiny), -1.0 - y / 2)
    first = -exponent / 4 * (1 + x)
    second = (1 + 3 * x**2) * ratio + 4 * (1 + x) * log_y + 5 + x
    soft = exponent / 2 * np.maximum(y, tiny) ** (exponent / 2 - 1)
    return (first - exponent**2 / 32 * second) / soft
