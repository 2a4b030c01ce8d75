"""Enumerations shared by every step; stored as small integers, shown by name."""

from __future__ import annotations

from enum import IntEnum, StrEnum


class Channel(StrEnum):
    """Decay channel of the pair."""

    LEPTON_JETS = "lepton+jets"
    ALL_HADRONIC = "all-hadronic"


class Helicity(IntEnum):
    """Helicities of the colliding beams; the value is the electron's sign.

    ``LR`` is e-L e+R, ``RL`` is e-R e+L; ``MIXED`` has stated polarisations (0 and 0
    for unpolarised beams).
    """

    LR = -1
    MIXED = 0
    RL = 1


BEAMS = {Helicity.LR.name: "e-L e+R", Helicity.RL.name: "e-R e+L"}
"""Pure beams as people write them."""


class Status(IntEnum):
    """Why an event has, or has not, a reconstructed pair."""

    OK = 0
    NO_TRUTH = 1
    TOO_FEW_OBJECTS = 2
    NO_NEUTRINO = 3
    NOT_CONVERGED = 4
    NON_FINITE = 5


class Branch(IntEnum):
    """Which reconstruction made the pair."""

    NONE = 0
    RESOLVED = 1
    BOOSTED = 2


class PairingClass(IntEnum):
    """How the chosen assignment compares with the generated quarks.

    Tested in this order. ``correct`` compares sets: the two W jets are unordered and
    it is blind to which side is the top, which is a question of charge. Boosted:
    ``correct`` or ``leaking``.
    """

    NO_TRUTH = 0
    NOT_SIGNAL = 1
    UNMATCHED = 2
    CORRECT = 3
    B_SWAPPED = 4
    W_MIXED = 5
    LEAKING = 6
