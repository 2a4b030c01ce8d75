"""Settings of the pairing: terms, masses, neutrino, b scores."""

from __future__ import annotations

from enum import StrEnum
from typing import Any, Self

from pydantic import model_validator

from toprecon.constants import B_MASS, TOP_MASS, W_MASS
from toprecon.options import Options, option
from toprecon.pairing.calibration import Calibration
from toprecon.pairing.names import TermName, TermOptions

# Masses only: they are not redundant. The others are there to be switched on.
_PLAIN = (
    TermName.W_MASS,
    TermName.HADRONIC_TOP_MASS,
    TermName.LEPTONIC_TOP_MASS,
)

PLAIN_TERMS: tuple[TermOptions, ...] = tuple(
    TermOptions(name=name, on=name in _PLAIN) for name in TermName
)


class NeutrinoMethod(StrEnum):
    """Where the neutrino momentum comes from."""

    MISSING = "missing"
    W_MASS = "w_mass"
    ISR = "isr"


class MissingSource(StrEnum):
    """What the missing momentum is."""

    OBJECTS = "objects"
    STORED = "stored"


class NeutrinoOptions(Options):
    """How the neutrino is found."""

    method: NeutrinoMethod = option(
        NeutrinoMethod.MISSING,
        "missing momentum with E = |p| ('missing'); p_z from the W mass, the root nearer "
        "to the missing one or the real part of complex ones ('w_mass'); or what is "
        "left after one photon along the beam ('isr')",
    )
    source: MissingSource = option(
        MissingSource.OBJECTS,
        "missing momentum: minus the sum of the stored jets, leptons and photons "
        "('objects'), or the one 'stored' with the events",
    )


class TagUse(StrEnum):
    """What the b scores do in the pairing."""

    MASK = "mask"
    LIKELIHOOD = "likelihood"
    IGNORE = "ignore"


class ScoreKind(StrEnum):
    """What an assignment is judged by."""

    PLAIN = "plain"
    CORRELATED = "correlated"
    RATIO = "ratio"


class PairingOptions(Options):
    """How jets are paired."""

    score: ScoreKind = option(
        ScoreKind.PLAIN,
        "sum over the terms ('plain'), chi-square with the covariance of a calibration "
        "('correlated'), or -2 ln of its likelihood ratio right/wrong ('ratio')",
    )

    terms: tuple[TermOptions, ...] = option(
        PLAIN_TERMS, "terms of the chi-square, each at most once"
    )
    tags: TagUse = option(
        TagUse.MASK,
        "b scores: the two highest are the b candidates ('mask'), add -2 ln of their "
        "likelihood ratio from a calibration ('likelihood'), or are not used ('ignore')",
    )
    charges: bool = option(
        False,
        "lepton+jets: the charges of the b jets, against that of the lepton, add -2 ln of "
        "their likelihood from a calibration",
    )
    calibrations: tuple[Calibration, ...] = option(
        (), "calibrations, one per channel and collision energy, from calibrate"
    )
    cap: int = option(
        6,
        "jets considered, the most energetic ones; every subset of them is tried",
        low=4,
        high=8,
        step=1,
    )
    top_mass: float = option(TOP_MASS, "top mass of the targets", unit="GeV", above=0)
    w_mass: float = option(W_MASS, "W mass of the targets", unit="GeV", above=0)
    b_mass: float = option(B_MASS, "b mass of the targets", unit="GeV", low=0)
    neutrino: NeutrinoOptions = option(
        None, "how the neutrino is found", factory=NeutrinoOptions
    )

    @model_validator(mode="after")
    def _distinct_terms(self) -> Self:
        names = [term.name.value for term in self.terms]
        twice = sorted({name for name in names if names.count(name) > 1})
        if twice:
            msg = f"terms: each term may appear once; got {', '.join(twice)} twice"
            raise ValueError(msg)
        if self.top_mass <= self.w_mass + self.b_mass:
            msg = (
                "top_mass must be above w_mass + b_mass; got "
                f"{self.top_mass:g} and {self.w_mass:g} + {self.b_mass:g} GeV"
            )
            raise ValueError(msg)
        return self

    @model_validator(mode="after")
    def _calibrated_if_needed(self) -> Self:
        needs = [
            f"{name} = {value}"
            for name, value, needed in (
                ("score", self.score.value, self.score is not ScoreKind.PLAIN),
                ("tags", self.tags.value, self.tags is TagUse.LIKELIHOOD),
                ("charges", "true", self.charges),
            )
            if needed
        ]
        if needs and not self.calibrations:
            msg = (
                f"{needs[0]} requires calibrations, but got none; make one with "
                "toprecon.pairing.calibrate"
            )
            raise ValueError(msg)
        return self

    def calibrated(self, *calibrations: Calibration, **settings: Any) -> Self:
        """Return the options with calibrations and what uses them.

        Parameters
        ----------
        *calibrations : Calibration
            From :func:`~toprecon.pairing.calibrate`; they replace those there.
        **settings
            Other fields, such as ``charges=True``. The score is ``ratio`` if not given.

        Returns
        -------
        PairingOptions
            With ``plain`` the targets and resolutions of the first calibration are
            taken over into the terms.
        """
        settings = {"score": ScoreKind.RATIO, **settings}
        result = self.replace(calibrations=calibrations, **settings)
        if result.score is not ScoreKind.PLAIN:
            return result
        for term in calibrations[0].terms:
            result = result.with_term(
                term.name, target=term.target, below=term.below, above=term.above
            )
        return result

    def term(self, name: TermName) -> TermOptions | None:
        """Return the term of a name if it is there and on."""
        for term in self.terms:
            if term.name is name and term.on:
                return term
        return None

    def with_term(self, name: str, **settings: Any) -> Self:
        """Return the options with one term changed or added.

        Parameters
        ----------
        name : str
            Name of the term.
        **settings
            Fields of :class:`TermOptions`.

        Returns
        -------
        PairingOptions
            The other terms keep their places.
        """
        key = TermOptions(name=name).name
        terms = list(self.terms)
        position = [t.name for t in terms].index(key) if self._has(key) else len(terms)
        old = terms[position] if position < len(terms) else TermOptions(name=key)
        terms[position : position + 1] = [old.replace(**settings)]
        return self.replace(terms=tuple(terms))

    def _has(self, name: TermName) -> bool:
        """Whether a term is listed, on or off."""
        return any(term.name is name for term in self.terms)
