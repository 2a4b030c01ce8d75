"""Boosted: tops as fat jets, from particles.

*Takes* Events with particles. *Gives* Tops: one reconstructed pair per event, with the
substructure of its fat jets.
"""

from __future__ import annotations

from toprecon.boosted.calibration import calibrate_charge
from toprecon.boosted.containment import contained, containment_class, decay_opening
from toprecon.boosted.correlators import Correlators, energy_correlators
from toprecon.boosted.grooming import Groomed, soft_drop
from toprecon.boosted.nsubjettiness import n_subjettiness
from toprecon.boosted.observables import OBSERVABLES, SUBSTRUCTURE
from toprecon.boosted.options import (
    Axis,
    BoostedOptions,
    ChargeOptions,
    FatJetAlgorithm,
    FeatureTable,
    SubjetAxes,
    SubstructureOptions,
    TagLikelihood,
    TagMethod,
    TagOptions,
    WChoice,
)
from toprecon.boosted.subjets import WCandidate, splitting_scale, w_candidate
from toprecon.boosted.substructure import Substructure, measure
from toprecon.boosted.tagging import (
    LIKELIHOOD_FEATURES,
    Roc,
    TagRates,
    calibrate_tag,
    passes_tag,
    roc,
    tag_rates,
    tag_score,
)
from toprecon.boosted.topfinding import fat_jet_table, find_tops

__all__ = [
    "LIKELIHOOD_FEATURES",
    "OBSERVABLES",
    "SUBSTRUCTURE",
    "Axis",
    "BoostedOptions",
    "ChargeOptions",
    "Correlators",
    "FatJetAlgorithm",
    "FeatureTable",
    "Groomed",
    "Roc",
    "SubjetAxes",
    "Substructure",
    "SubstructureOptions",
    "TagLikelihood",
    "TagMethod",
    "TagOptions",
    "TagRates",
    "WCandidate",
    "WChoice",
    "calibrate_charge",
    "calibrate_tag",
    "contained",
    "containment_class",
    "decay_opening",
    "energy_correlators",
    "fat_jet_table",
    "find_tops",
    "measure",
    "n_subjettiness",
    "passes_tag",
    "roc",
    "soft_drop",
    "splitting_scale",
    "tag_rates",
    "tag_score",
    "w_candidate",
]
