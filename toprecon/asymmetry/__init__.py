"""Asymmetry: A_FB generated and reconstructed, and why they differ.

*Takes* rows of the event table with weights. *Gives* mergeable sums, and from them
A_FB, the distortion budget, flip probabilities and the spectra of the angle.
"""

from __future__ import annotations

from toprecon.asymmetry.budget import STEPS, BudgetStep, DistortionBudget
from toprecon.asymmetry.comparison import Comparison, Difference, Rows, compare
from toprecon.asymmetry.estimators import (
    AngularFit,
    Estimator,
    EstimatorOptions,
    EstimatorResult,
    estimate,
    fit_terms,
)
from toprecon.asymmetry.helicities import (
    BeamRun,
    HelicityObservables,
    helicity_observables,
)
from toprecon.asymmetry.meaning import (
    BiasMeaning,
    CouplingShift,
    asymmetry_derivative,
    meaning_of,
)
from toprecon.asymmetry.result import (
    AsymmetryResult,
    ClassResult,
    Corrected,
    FlipResult,
)
from toprecon.asymmetry.scan_sums import Keep, ScanAxis, ScanSums, accumulate_scan
from toprecon.asymmetry.scans import (
    Bias,
    ScanOptions,
    ScanPoint,
    ScanResult,
    ScanValues,
)
from toprecon.asymmetry.spectra import VARIANTS, AngleSpectra
from toprecon.asymmetry.sums import AsymmetrySums, accumulate

__all__ = [
    "STEPS",
    "VARIANTS",
    "AngleSpectra",
    "AngularFit",
    "AsymmetryResult",
    "AsymmetrySums",
    "BeamRun",
    "Bias",
    "BiasMeaning",
    "BudgetStep",
    "ClassResult",
    "Comparison",
    "Corrected",
    "CouplingShift",
    "Difference",
    "DistortionBudget",
    "Estimator",
    "EstimatorOptions",
    "EstimatorResult",
    "FlipResult",
    "HelicityObservables",
    "Keep",
    "Rows",
    "ScanAxis",
    "ScanOptions",
    "ScanPoint",
    "ScanResult",
    "ScanSums",
    "ScanValues",
    "accumulate",
    "accumulate_scan",
    "asymmetry_derivative",
    "compare",
    "estimate",
    "fit_terms",
    "helicity_observables",
    "meaning_of",
]
