"""Pairing: which jets make which top.

*Takes* Events. *Gives* Tops: one reconstructed pair per event, with the chosen
assignment and how clearly it was chosen.
"""

from __future__ import annotations

from toprecon.pairing.calibrating import calibrate
from toprecon.pairing.calibration import Calibration
from toprecon.pairing.candidates import OBSERVABLES, build, observables_with
from toprecon.pairing.chisquare import contributions, pair
from toprecon.pairing.fit_blocks import fit
from toprecon.pairing.fit_options import (
    FitOptions,
    JetResolution,
    LeptonResolution,
    TopMasses,
)
from toprecon.pairing.fit_result import FIT_OBSERVABLES, FitResult
from toprecon.pairing.names import TermName, TermOptions
from toprecon.pairing.options import (
    MissingSource,
    NeutrinoMethod,
    NeutrinoOptions,
    PairingOptions,
    ScoreKind,
    TagUse,
)
from toprecon.pairing.stated_shares import (
    ChargePurity,
    Reliability,
    charge_purity,
    reliability,
)

__all__ = [
    "FIT_OBSERVABLES",
    "OBSERVABLES",
    "Calibration",
    "ChargePurity",
    "FitOptions",
    "FitResult",
    "JetResolution",
    "LeptonResolution",
    "MissingSource",
    "NeutrinoMethod",
    "NeutrinoOptions",
    "PairingOptions",
    "Reliability",
    "ScoreKind",
    "TagUse",
    "TermName",
    "TermOptions",
    "TopMasses",
    "build",
    "calibrate",
    "charge_purity",
    "contributions",
    "fit",
    "observables_with",
    "pair",
    "reliability",
]
