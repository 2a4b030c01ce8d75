"""A simple decay of taus for the response to partons.

The visible part keeps the direction of the tau. The shower chain decays taus in full.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
TO_ELECTRON = 0.178  # branching fractions, Review of Particle Physics
TO_MUON = 0.174


def decay_taus(
    rng: np.random.Generator, p: FloatArray, codes: NDArray[Any]
) -> tuple[FloatArray, NDArray[Any]]:
    """Replace taus by what is seen of them.

    Parameters
    ----------
    rng : numpy.random.Generator
        Random numbers; none are used if there are no taus.
    p : array, shape (4, E, J)
        Momenta of the fermions [GeV].
    codes : array of int, shape (E, J)
        Their codes.

    Returns
    -------
    tuple of array
        Visible momenta, and codes: 11 or 13 for leptonic decays with the sign of the
        tau, 15 for hadronic ones.

    Notes
    -----
    Leptonic: the energy fraction x has the density (5 - 9 x^2 + 4 x^3)/3 of an
    unpolarised tau at high energy (every textbook). Hadronic: uniform above 1/4, near
    the mean of 0.6 for the mix of decays; common practice.
    """
    tau = np.abs(codes) == 15
    if not tau.any():
        return p, codes
    u, v = rng.random((2, *codes.shape))
    leptonic = tau & (u < TO_ELECTRON + TO_MUON)
    grid = np.linspace(0, 1, 1001)
    cumulative = (5 * grid - 3 * grid**3 + grid**4) / 3
    share = np.where(leptonic, np.interp(v, cumulative, grid), 0.25 + 0.75 * v)
    charged = np.where(u < TO_ELECTRON, 11, 13) * np.sign(codes)
    return np.where(tau, share, 1.0) * p, np.where(leptonic, charged, codes)
