"""Settings of the boosted branch."""

from __future__ import annotations

import math
from enum import StrEnum
from typing import Self

from pydantic import model_validator

from toprecon.constants import W_MASS
from toprecon.options import Options, option


class FatJetAlgorithm(StrEnum):
    """How particles become two fat jets.

    ``durham`` and ``generalised_kt``: exactly two jets that hold every particle;
    ``hemispheres``: the two sides of the plane across the thrust axis; ``inclusive``:
    the two most energetic generalised-kT jets of a limited radius, so that radiation
    at large angles stays outside.
    """

    DURHAM = "durham"
    GENERALISED_KT = "generalised_kt"
    HEMISPHERES = "hemispheres"
    INCLUSIVE = "inclusive"


class Axis(StrEnum):
    """Which momentum of the fat jet is the top: after or before grooming."""

    GROOMED = "groomed"
    UNGROOMED = "ungroomed"


class SubjetAxes(StrEnum):
    """Axes of N-subjettiness: those of N Durham jets, or moved to a minimum."""

    DURHAM = "durham"
    MINIMISED = "minimised"


class WChoice(StrEnum):
    """Which two of the three subjets are the W.

    ``closest``: mass closest to the W mass; ``smallest``: pair of least mass, which
    does not make a peak at the W mass by itself; ``merged``: the pair that merges
    first.
    """

    CLOSEST = "closest"
    SMALLEST = "smallest"
    MERGED = "merged"


class TagMethod(StrEnum):
    """How fat jets are tagged: cuts on the observables, or a likelihood ratio."""

    CUTS = "cuts"
    LIKELIHOOD = "likelihood"


class SubstructureOptions(Options):
    """Grooming and the measures of substructure."""

    z_cut: float = option(
        0.1,
        "soft drop: least energy share of the softer branch at the angle R_0; 0 is off",
        low=0,
        high=0.5,
        step=0.01,
    )
    beta: float = option(
        2.0, "soft drop: exponent of the angle", low=-2, high=5, step=0.1
    )
    radius: float = option(
        math.pi / 2,
        "R_0 of soft drop and of the normalisation of N-subjettiness",
        unit="rad",
        above=0,
        high=math.pi,
    )
    on_groomed: bool = option(
        True, "substructure of the groomed jet; off: of all its particles"
    )
    axes: SubjetAxes = option(SubjetAxes.DURHAM, "axes of N-subjettiness")
    subjettiness_beta: float = option(
        1.0, "exponent of the angle in N-subjettiness", above=0, high=4, step=0.1
    )
    correlator_beta: float = option(
        1.0, "exponent of the angles in the energy correlators", above=0, high=4
    )
    w_choice: WChoice = option(
        WChoice.CLOSEST, "which two of the three subjets are the W"
    )
    w_mass: float = option(
        W_MASS, "W mass that the closest pair is compared with", unit="GeV", above=0
    )


class FeatureTable(Options):
    """Log likelihood ratio of one observable, by bins."""

    name: str = option(..., "observable without 'boosted.'")
    edges: tuple[float, ...] = option(..., "increasing edges")
    log_ratio: tuple[float, ...] = option(
        ..., "ln(signal/background): below the first edge, in the bins, above the last"
    )
    weight: float = option(1.0, "factor on the log ratio; below 1 if it is not alone")

    @model_validator(mode="after")
    def _fitting(self) -> Self:
        if any(b <= a for a, b in zip(self.edges, self.edges[1:], strict=False)):
            msg = f"edges must increase; got {self.edges!r}"
            raise ValueError(msg)
        if len(self.log_ratio) != len(self.edges) + 1:
            msg = (
                f"one log ratio more than edges is required; got {len(self.log_ratio)} "
                f"for {len(self.edges)} edges"
            )
            raise ValueError(msg)
        return self


class TagLikelihood(Options):
    """Calibrated likelihood ratio: a weighted sum over observables, made a probability."""

    features: tuple[FeatureTable, ...] = option((), "tables of the observables")
    offset: float = option(0.0, "added to the weighted sum of the log ratios")


class TagOptions(Options):
    """When a fat jet is tagged as a top."""

    method: TagMethod = option(TagMethod.CUTS, "cuts, or a calibrated likelihood ratio")
    mass_low: float = option(140.0, "least groomed mass", unit="GeV", low=0)
    mass_high: float = option(210.0, "largest groomed mass", unit="GeV", low=0)
    w_mass_low: float = option(55.0, "least W candidate mass", unit="GeV", low=0)
    w_mass_high: float = option(105.0, "largest W candidate mass", unit="GeV", low=0)
    energy_share_low: float = option(
        0.65,
        "least energy over half the collision energy; below it quarks often leak",
        low=0,
        high=1,
        step=0.05,
    )
    tau_32_high: float = option(1.0, "largest tau_3/tau_2", low=0, high=1, step=0.05)
    w_helicity_high: float = option(
        1.0, "largest cosine of the W helicity angle", low=-1, high=1, step=0.05
    )
    score_low: float = option(
        0.5, "likelihood: least probability to be a top", low=0, high=1, step=0.05
    )
    likelihood: TagLikelihood = option(
        None,
        "tables of the likelihood ratio, from calibrate_tag",
        factory=TagLikelihood,
    )

    @model_validator(mode="after")
    def _consistent(self) -> Self:
        for name in ("mass", "w_mass"):
            low, high = getattr(self, f"{name}_low"), getattr(self, f"{name}_high")
            if high <= low:
                msg = f"{name}_high must be > {name}_low = {low:g} GeV; got {high:g}"
                raise ValueError(msg)
        if self.method is TagMethod.LIKELIHOOD and not self.likelihood.features:
            msg = (
                "method 'likelihood' requires tables in likelihood.features, but got "
                "none; make them with toprecon.boosted.calibrate_tag"
            )
            raise ValueError(msg)
        return self


class ChargeOptions(Options):
    """Sign of all-hadronic pairs from a weighted sum of charges.

    The weights multiply the charges of the first fat jet minus those of the second.
    The defaults were fitted to 2000 simulated pairs at 1.4 TeV; they depend on how well
    charges are measured, so fit them again with ``calibrate_charge``.
    """

    kappa: float = option(
        0.3, "exponent of the energy share in the jet charges", low=0, high=2, step=0.05
    )
    vertex: float = option(-1.0, "weight of the vertex charge of the b jet")
    b_charge: float = option(-0.35, "weight of the charge of the b jet")
    w_charge: float = option(1.65, "weight of the charge of the rest of the fat jet")
    lepton_charge: float = option(-0.55, "weight of the charge of leptons in the b jet")


class BoostedOptions(Options):
    """How tops are found as fat jets."""

    algorithm: FatJetAlgorithm = option(
        FatJetAlgorithm.GENERALISED_KT, "how particles become fat jets"
    )
    power: float = option(
        0.0,
        "exponent p of generalised kT: 1 like kT, 0 by angle alone, -1 like anti-kT",
        low=-2,
        high=2,
        step=0.5,
    )
    radius: float = option(
        1.0,
        "inclusive: radius of the fat jets (at the reference energy if one is set)",
        unit="rad",
        above=0,
        high=math.pi,
    )
    reference_energy: float = option(
        0.0,
        "inclusive: the radius is scaled with this energy over sqrt(s); 0 is off",
        unit="GeV",
        low=0,
    )
    least_energy: float = option(
        10.0, "least energy of a fat jet", unit="GeV", low=0, step=10
    )
    axis: Axis = option(Axis.GROOMED, "momentum taken as that of the top")
    substructure: SubstructureOptions = option(
        None, "grooming and substructure", factory=SubstructureOptions
    )
    tag: TagOptions = option(None, "the tag", factory=TagOptions)
    charge: ChargeOptions = option(
        None, "sign in all-hadronic events", factory=ChargeOptions
    )
