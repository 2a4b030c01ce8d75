"""Decay of the top at leading order: t -> W b, W -> fermions."""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from toprecon.constants import FERMI_CONSTANT, TOP_MASS, W_MASS
from toprecon.errors import OptionError, nearest
from toprecon.kinematics import decay_momentum

FloatArray = NDArray[np.float64]


class HelicityFractions(NamedTuple):
    """Shares of longitudinal, left- and right-handed W bosons."""

    longitudinal: float
    left: float
    right: float


def w_helicity_fractions(
    top_mass: float = TOP_MASS, w_mass: float = W_MASS, b_mass: float = 0.0
) -> HelicityFractions:
    """Return the helicity fractions of the W in t -> W b at leading order.

    Parameters
    ----------
    top_mass, w_mass, b_mass : float
        Masses [GeV].

    Returns
    -------
    HelicityFractions
        Longitudinal, left, right for the top; for the antitop left and right swap.

    References
    ----------
    For a massless b: m_t^2 : 2 m_W^2 : 0, every textbook; with a massive b: J. A.
    Aguilar-Saavedra et al., hep-ph/0605190, section 2.

    Examples
    --------
    >>> [round(x, 4) for x in w_helicity_fractions(172.5, 80.379)]
    [0.6972, 0.3028, 0.0]
    """
    x2, y2 = (w_mass / top_mass) ** 2, (b_mass / top_mass) ** 2
    momentum = 2 * float(decay_momentum(top_mass, w_mass, b_mass)) / top_mass
    longitudinal = (1 - y2) ** 2 - x2 * (1 + y2)
    total = (1 - y2) ** 2 + x2 * (1 - 2 * x2 + y2)
    energy = 1 - x2 + y2
    return HelicityFractions(
        longitudinal / total,
        x2 * (energy + momentum) / total,
        x2 * (energy - momentum) / total,
    )


def helicity_angle_density(
    cos_angle: Any, fractions: HelicityFractions | None = None
) -> FloatArray:
    """Return the density of the helicity angle of the charged lepton or down quark.

    Parameters
    ----------
    cos_angle : array
        Cosine of the angle, in the W frame, to the direction of the W in the top
        frame.
    fractions : HelicityFractions, optional
        Leading order if absent.

    Returns
    -------
    array
        Density, integral 1 over [-1, 1].
    """
    c = np.asarray(cos_angle, dtype=np.float64)
    f = fractions or w_helicity_fractions()
    return (
        0.375 * f.right * (1 + c) ** 2
        + 0.375 * f.left * (1 - c) ** 2
        + 0.75 * f.longitudinal * (1 - c**2)
    )


def analysing_power(
    product: str, top_mass: float = TOP_MASS, w_mass: float = W_MASS
) -> float:
    """Return the spin-analysing power of a product of the top, massless b.

    Parameters
    ----------
    product : str
        ``"lepton"`` or ``"down"`` (+1), ``"neutrino"`` or ``"up"``, ``"b"``, ``"w"``.
    top_mass, w_mass : float
        Masses [GeV].

    Returns
    -------
    float
        kappa in (1 + P kappa cos)/2; the antitop has the opposite sign.

    Raises
    ------
    OptionError
        If the product is not known.

    References
    ----------
    M. Jezabek, Nucl. Phys. B Proc. Suppl. 37 (1994) 197; A. Brandenburg, Z. G. Si,
    P. Uwer, hep-ph/0205023.
    """
    ratio = (top_mass / w_mass) ** 2
    of_w = (ratio - 2) / (ratio + 2)
    of_neutrino = (
        (ratio - 1) * (ratio**2 - 11 * ratio - 2) + 12 * ratio * math.log(ratio)
    ) / ((ratio + 2) * (ratio - 1) ** 2)
    powers = {
        "lepton": 1.0,
        "down": 1.0,
        "neutrino": of_neutrino,
        "up": of_neutrino,
        "b": -of_w,
        "w": of_w,
    }
    if product not in powers:
        msg = f"product: unknown decay product {product!r}{nearest(product, powers)}"
        raise OptionError(msg)
    return powers[product]


def top_width(
    top_mass: float = TOP_MASS,
    w_mass: float = W_MASS,
    *,
    alpha_strong: float = 0.0,
    fermi_constant: float = FERMI_CONSTANT,
) -> float:
    """Return the width of t -> W b, massless b [GeV].

    Parameters
    ----------
    top_mass, w_mass : float
        Masses [GeV].
    alpha_strong : float
        Strong coupling of the first-order correction; 0 gives the leading order.
    fermi_constant : float
        Fermi constant [GeV^-2].

    Returns
    -------
    float
        Width [GeV].

    References
    ----------
    M. Jezabek, J. H. Kuhn, Nucl. Phys. B314 (1989) 1.
    """
    y = (w_mass / top_mass) ** 2
    leading = (
        fermi_constant
        * top_mass**3
        / (8 * math.pi * math.sqrt(2))
        * (1 - y) ** 2
        * (1 + 2 * y)
    )
    return leading * width_correction(y, alpha_strong)


def width_correction(mass_ratio2: float, alpha_strong: float) -> float:
    """Return the first-order QCD factor of the width.

    Parameters
    ----------
    mass_ratio2 : float
        (m_W/m_t)^2, below 1; 0 gives the limit of a light W.
    alpha_strong : float
        Strong coupling.

    Returns
    -------
    float
        1 - (2 alpha_s / 3 pi) F.

    References
    ----------
    M. Jezabek, J. H. Kuhn, Nucl. Phys. B314 (1989) 1.
    """
    y = mass_ratio2
    if alpha_strong == 0:
        return 1.0
    if y == 0:
        function = 2 * math.pi**2 / 3 - 2.5
    else:
        from scipy.special import spence

        # Li2(z) = spence(1 - z) in SciPy's convention
        dilogarithms = 2 * float(spence(1 - y)) - 2 * float(spence(y))
        born = 2 * (1 - y) ** 2 * (1 + 2 * y)
        function = (
            born * (math.pi**2 + dilogarithms)
            + 4 * y * (1 - y - 2 * y**2) * math.log(y)
            + 2 * (1 - y) ** 2 * (5 + 4 * y) * math.log(1 - y)
            - (1 - y) * (5 + 9 * y - 6 * y**2)
        ) / born
    return 1 - 2 * alpha_strong / (3 * math.pi) * function


def b_momentum(
    top_mass: float = TOP_MASS, w_mass: float = W_MASS, b_mass: float = 0.0
) -> float:
    """Return the momentum of the b in the top rest frame [GeV]."""
    return float(decay_momentum(top_mass, w_mass, b_mass))


def mean_lepton_energy(top_mass: float = TOP_MASS, w_mass: float = W_MASS) -> float:
    """Return the mean energy of the charged lepton in the top rest frame [GeV].

    Parameters
    ----------
    top_mass, w_mass : float
        Masses [GeV]; the b is massless.

    Returns
    -------
    float
        Mean of E, whose density is x(1 - x) for (m_W/m_t)^2 <= x = 2E/m_t <= 1.
    """
    y = (w_mass / top_mass) ** 2
    first = (1 - y**3) / 3 - (1 - y**4) / 4
    zeroth = (1 - y**2) / 2 - (1 - y**3) / 3
    return top_mass / 2 * first / zeroth


def largest_lepton_b_mass(top_mass: float = TOP_MASS, w_mass: float = W_MASS) -> float:
    """Return the upper end of the lepton-b mass [GeV], massless b."""
    return math.sqrt(top_mass**2 - w_mass**2)
