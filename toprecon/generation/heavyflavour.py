"""Which particle codes are hadrons with a b or c quark that decay weakly."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

# Monte Carlo numbering scheme, Review of Particle Physics
BEAUTY = frozenset({511, 521, 531, 541, 5122, 5132, 5232, 5332})
CHARM = frozenset({411, 421, 431, 4122, 4132, 4232, 4332})
HEAVY = BEAUTY | CHARM


def quark_codes(codes: NDArray[Any]) -> NDArray[np.int64]:
    """Return the code of the heavy quark in each hadron, with its sign.

    Parameters
    ----------
    codes : array of int
        Codes of hadrons of :data:`HEAVY`.

    Returns
    -------
    array of int
        5 or 4 for a quark, -5 or -4 for an antiquark. A meson with a positive code
        holds an antiquark b or a quark c, a baryon with a positive code a quark.
    """
    flavour = np.abs(codes)
    beauty = np.isin(flavour, list(BEAUTY))
    meson = flavour < 1000
    sign = np.where(beauty & meson, -1, 1) * np.sign(codes)
    return np.where(beauty, 5, 4) * sign
