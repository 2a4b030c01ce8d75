"""Flavour tags and charges of jets as a detector would measure them."""

from __future__ import annotations

from statistics import NormalDist
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.generation.response_options import ResponseOptions

FloatArray = NDArray[np.float64]
SCORE_WIDTH = 2.0  # spread of the score on the logistic scale
_CHARGES = {2: 2 / 3, 4: 2 / 3, 6: 2 / 3, 1: -1 / 3, 3: -1 / 3, 5: -1 / 3, 15: -1.0}


def btag_score(
    normal: FloatArray, codes: NDArray[Any], options: ResponseOptions
) -> FloatArray:
    """Return the b score of jets from partons with given codes.

    Parameters
    ----------
    normal : array
        Standard normal random numbers.
    codes : array of int
        Codes of the partons; b and c count, all others are light.
    options : ResponseOptions
        Shares above a score of 0.5.

    Returns
    -------
    array
        In (0, 1): the logistic function of a Gaussian, whose mean gives the share.
    """
    flavour = np.abs(codes)
    b, c, light = (
        NormalDist().inv_cdf(share)
        for share in (
            options.btag_efficiency_b,
            options.btag_efficiency_c,
            options.btag_efficiency_light,
        )
    )
    mean = np.where(flavour == 5, b, np.where(flavour == 4, c, light))
    latent = SCORE_WIDTH * (mean + normal)
    return 1 / (1 + np.exp(-latent))


def charge_measurement(
    normal: FloatArray, charge: NDArray[Any], purity: float, *, width: float
) -> FloatArray:
    """Return a measured charge whose sign is right with a given probability.

    Parameters
    ----------
    normal : array
        Standard normal random numbers.
    charge : array
        True charge; its sign counts, and 0 gives no preference.
    purity : float
        Probability of the right sign.
    width : float
        Standard deviation of the measurement.

    Returns
    -------
    array
        Gaussian about a mean of the right sign.
    """
    # the inverse of the normal distribution is infinite at 1
    mean = NormalDist().inv_cdf(min(purity, 1 - 1e-12))
    return width * (np.sign(charge) * mean + normal)


def electric_charge(codes: NDArray[Any]) -> FloatArray:
    """Return the charges of quarks and taus with given codes, in units of e."""
    flavour = np.abs(codes)
    charge = np.zeros(codes.shape)
    for code, value in _CHARGES.items():
        charge[flavour == code] = value
    return charge * np.sign(codes)
