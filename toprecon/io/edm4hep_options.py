"""Settings of the EDM4hep reader: which collections, which tag, which leptons."""

from __future__ import annotations

from toprecon.options import Options, option


class TagRule(Options):
    """Where a number of a jet is, such as its b score.

    With nothing given for the b score, the conventions in use are tried in turn.
    """

    collection: str = option("", "collection of particle identifications")
    field: str = option("", "'likelihood', or 'parameters' for a stored parameter")
    index: int = option(0, "which of the parameters", low=0)
    pdg: int = option(0, "take only entries with this code; 0 takes any")
    bit: int = option(
        -1, "read the parameter as a word and take this bit; -1 takes the value", low=-1
    )
    none: bool = option(default=False, doc="whether to read none at all")


class IsolationRule(Options):
    """How leptons are selected from particle-flow objects."""

    minimum_energy: float = option(10.0, "least energy", unit="GeV", low=0.0)
    cone: float = option(0.3, "half opening angle of the cone", unit="rad", above=0.0)
    maximum: float = option(
        0.15, "largest energy in the cone over that of the lepton", low=0.0
    )


class Edm4hepOptions(Options):
    """Names of collections; empty ones are found by their class."""

    jets: str = option("", "jets")
    leptons: tuple[str, ...] = option((), "isolated leptons")
    particles: str = option("", "particle-flow objects")
    photons: str = option("", "isolated photons")
    missing: str = option("", "missing momentum")
    truth: str = option("", "generated particles")
    header: str = option("", "event header")
    tag: TagRule = option(None, "b score", factory=TagRule)
    track_charge: TagRule | None = option(
        None, "track charge of the jets; by default from their constituents"
    )
    vertex_charge: TagRule | None = option(None, "charge of the b vertex")
    isolation: IsolationRule = option(
        None, "leptons from particle-flow objects", factory=IsolationRule
    )
    sqrt_s: float | None = option(
        None, "nominal collision energy, if the file does not say", unit="GeV", above=0
    )
