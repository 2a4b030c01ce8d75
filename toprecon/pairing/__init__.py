"""Pairing: which jets make which top.

*Takes* Events. *Gives* Tops: one reconstructed pair per event, with the chosen
assignment and how clearly it was chosen.
"""

from __future__ import annotations

from toprecon.pairing.candidates import OBSERVABLES, build
from toprecon.pairing.chisquare import contributions, pair
from toprecon.pairing.options import (
    MissingSource,
    NeutrinoMethod,
    NeutrinoOptions,
    PairingOptions,
    TagUse,
    TermName,
    TermOptions,
)

__all__ = [
    "OBSERVABLES",
    "MissingSource",
    "NeutrinoMethod",
    "NeutrinoOptions",
    "PairingOptions",
    "TagUse",
    "TermName",
    "TermOptions",
    "build",
    "contributions",
    "pair",
]
