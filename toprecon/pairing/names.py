"""The quantities that the pairing compares, and the settings of one comparison."""

from __future__ import annotations

from enum import StrEnum

from toprecon.options import Options, option


class TermName(StrEnum):
    """A quantity that the pairing chi-square compares with its target.

    The first five are taken on every hadronic side, the next five on the leptonic
    side. ``b_w_angle`` is the cosine of the laboratory angle between b and W.
    """

    W_MASS = "w_mass"
    HADRONIC_TOP_MASS = "hadronic_top_mass"
    TOP_ENERGY = "top_energy"
    B_MOMENTUM = "b_momentum"
    B_W_ANGLE = "b_w_angle"
    LEPTONIC_W_MASS = "leptonic_w_mass"
    LEPTONIC_TOP_MASS = "leptonic_top_mass"
    LEPTONIC_TOP_ENERGY = "leptonic_top_energy"
    LEPTONIC_B_MOMENTUM = "leptonic_b_momentum"
    LEPTONIC_B_W_ANGLE = "leptonic_b_w_angle"


HADRONIC_TERMS = tuple(TermName)[:5]
LEPTONIC_TERMS = tuple(TermName)[5:]

UNITS = {
    name: "" if name in {TermName.B_W_ANGLE, TermName.LEPTONIC_B_W_ANGLE} else "GeV"
    for name in TermName
}


class TermOptions(Options):
    """One term (value - target)^2 / resolution^2 of the pairing chi-square."""

    name: TermName = option(..., "quantity compared")
    on: bool = option(True, "whether the term counts")
    target: float | None = option(
        None, "value expected; from the masses and the collision energy if absent"
    )
    below: float | None = option(
        None, "resolution for values below the target; the usual one if absent", above=0
    )
    above: float | None = option(
        None, "resolution for values above the target; the usual one if absent", above=0
    )
