"""Settings of the generator."""

from __future__ import annotations

from enum import StrEnum
from typing import Any, Self

from pydantic import field_validator, model_validator

from toprecon.constants import W_TO_HADRONS, W_TO_ONE_LEPTON
from toprecon.events import Helicity
from toprecon.generation.detector_options import DetectorOptions
from toprecon.generation.response_options import ResponseOptions
from toprecon.options import Options, option
from toprecon.treelevel import ElectroweakInputs, FormFactors


class Process(StrEnum):
    """What the beams produce."""

    TTBAR = "ttbar"
    WW = "ww"
    ZZ = "zz"
    BB = "bb"
    QQ = "qq"


class Simulation(StrEnum):
    """How events become jets: one per parton, or by shower, detector, clustering."""

    PARTONS = "partons"
    SHOWER = "shower"


class Decays(StrEnum):
    """How the two W bosons decay in the events generated."""

    LEPTON_JETS = "lepton+jets"
    ALL_HADRONIC = "all-hadronic"
    DILEPTON = "dilepton"
    ALL = "all"


class Flavour(StrEnum):
    """Charged leptons of the leptonic W decays."""

    ELECTRON = "e"
    MUON = "mu"
    TAU = "tau"


class GenerationOptions(Options):
    """What is generated: beams, decays, couplings, response of the detector."""

    name: str = option("", "name of the sample; made from the settings if empty")
    process: Process = option(
        Process.TTBAR, "top pairs, or a background made by Pythia 8 (unpolarised)"
    )
    simulation: Simulation = option(
        Simulation.PARTONS, "one jet per quark (quick), or shower and jet clustering"
    )
    sqrt_s: float = option(
        500.0, "collision energy", unit="GeV", low=350, high=20000, step=10
    )
    helicity: Helicity = option(
        Helicity.LR, "LR (e-L e+R), RL (e-R e+L) or MIXED with the polarisations"
    )
    electron_polarisation: float = option(
        0.0, "of MIXED beams; > 0 is right-handed", low=-1, high=1, step=0.1
    )
    positron_polarisation: float = option(
        0.0, "of MIXED beams; > 0 is right-handed", low=-1, high=1, step=0.1
    )
    decays: Decays = option(Decays.LEPTON_JETS, "how the two W bosons decay")
    lepton_flavours: tuple[Flavour, ...] = option(
        (Flavour.ELECTRON, Flavour.MUON), "charged leptons of the leptonic decays"
    )
    radiation: bool = option(True, "photon radiation of the beams, along the beams")
    energy_spread: float = option(
        0.0012, "relative spread of the energy of each beam", low=0, high=0.05
    )
    minimum_sqrt_s_prime: float = option(
        0.0, "generate only pairs of at least this mass", unit="GeV", low=0
    )
    finite_widths: bool = option(True, "masses of top and W are spread by their widths")
    inputs: ElectroweakInputs = option(
        None, "couplings, masses and widths", factory=ElectroweakInputs
    )
    form_factors: FormFactors = option(
        None, "couplings of the top to photon and Z", factory=FormFactors
    )
    response: ResponseOptions = option(
        None, "resolutions, tag rates, charge purities", factory=ResponseOptions
    )
    detector: DetectorOptions = option(
        None, "detector behind the shower", factory=DetectorOptions
    )
    n_jets: int | None = option(
        None, "jets per showered event; 6 if all-hadronic, else 4", low=2, high=12
    )
    keep_particles: bool = option(False, "store the particles of showered events")
    preselect: bool = option(
        True,
        "of a background keep only events with a lepton and jets (or, for six jets, "
        "with jets and no lepton)",
    )

    @field_validator("helicity", mode="before")
    @classmethod
    def _by_name(cls, value: Any) -> Any:
        if isinstance(value, str) and value in Helicity.__members__:
            return Helicity[value]
        return value

    @model_validator(mode="after")
    def _background(self) -> Self:
        if self.process is Process.TTBAR:
            return self
        if self.simulation is not Simulation.SHOWER:
            msg = (
                f"process {self.process.value!r} needs simulation 'shower'; got "
                f"{self.simulation.value!r}"
            )
            raise ValueError(msg)
        unpolarised = not (self.electron_polarisation or self.positron_polarisation)
        if self.helicity is not Helicity.MIXED or not unpolarised:
            msg = (
                f"process {self.process.value!r} is unpolarised: helicity MIXED without "
                "polarisations is required; the cross section of the sample is stated "
                "per helicity"
            )
            raise ValueError(msg)
        return self

    @model_validator(mode="after")
    def _consistent(self) -> Self:
        mixed = self.helicity is Helicity.MIXED
        polarised = self.electron_polarisation or self.positron_polarisation
        if polarised and not mixed:
            msg = (
                "electron_polarisation and positron_polarisation belong to helicity "
                f"MIXED; got helicity {self.helicity.name}, which is fully polarised"
            )
            raise ValueError(msg)
        if mixed and abs(self.electron_polarisation + self.positron_polarisation) == 2:
            msg = (
                "electron_polarisation and positron_polarisation: beams of equal "
                "helicity make no top pairs; choose other values"
            )
            raise ValueError(msg)
        if len(set(self.lepton_flavours)) != len(self.lepton_flavours):
            msg = f"lepton_flavours: each at most once; got {self.lepton_flavours!r}"
            raise ValueError(msg)
        leptonic = self.decays in {Decays.LEPTON_JETS, Decays.DILEPTON}
        if leptonic and not self.lepton_flavours:
            msg = "lepton_flavours: at least one is required for leptonic decays"
            raise ValueError(msg)
        inputs = self.inputs
        lowest = 2 * inputs.top_mass
        if self.sqrt_s <= lowest:
            msg = (
                f"sqrt_s: must be above twice the top mass, {lowest:g} GeV; got "
                f"{self.sqrt_s:g}"
            )
            raise ValueError(msg)
        if inputs.top_mass <= inputs.w_mass + inputs.b_mass:
            msg = "inputs: the top mass must be above the masses of W and b together"
            raise ValueError(msg)
        if self.minimum_sqrt_s_prime >= self.sqrt_s:
            msg = (
                "minimum_sqrt_s_prime: must be below sqrt_s; got "
                f"{self.minimum_sqrt_s_prime:g} and {self.sqrt_s:g}"
            )
            raise ValueError(msg)
        return self

    @property
    def sample_name(self) -> str:
        """Name of the sample."""
        if self.name:
            return self.name
        if self.process is not Process.TTBAR:
            return f"{self.process.value}_{self.sqrt_s:g}"
        return f"ttbar_{self.decays.value}_{self.sqrt_s:g}_{self.helicity.name}"

    @property
    def jets_per_event(self) -> int:
        """Number of jets that showered events are clustered into."""
        if self.n_jets is not None:
            return self.n_jets
        return 6 if self.decays is Decays.ALL_HADRONIC else 4

    @property
    def branching_fraction(self) -> float:
        """Share of all pairs that decay as asked."""
        leptonic = W_TO_ONE_LEPTON * len(self.lepton_flavours)
        return {
            Decays.LEPTON_JETS: 2 * W_TO_HADRONS * leptonic,
            Decays.ALL_HADRONIC: W_TO_HADRONS**2,
            Decays.DILEPTON: leptonic**2,
            Decays.ALL: (W_TO_HADRONS + leptonic) ** 2,
        }[self.decays]
