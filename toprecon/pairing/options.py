"""Settings of the pairing: terms, masses, neutrino, b scores."""

from __future__ import annotations

from enum import StrEnum
from typing import Any, Self

from pydantic import model_validator

from toprecon.constants import B_MASS, TOP_MASS, W_MASS
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


class MissingSource(StrEnum):
    """What the missing momentum is."""

    OBJECTS = "objects"
    STORED = "stored"


class NeutrinoOptions(Options):
    """How the neutrino is found."""

    method: NeutrinoMethod = option(
        NeutrinoMethod.MISSING, "missing momentum with E = |p|"
    )
    source: MissingSource = option(
        MissingSource.OBJECTS,
        "missing momentum: minus the sum of the stored jets, leptons and photons "
        "('objects'), or the one 'stored' with the events",
    )


class TagUse(StrEnum):
    """What the b scores do in the pairing."""

    MASK = "mask"
    IGNORE = "ignore"


class PairingOptions(Options):
    """How jets are paired."""

    terms: tuple[TermOptions, ...] = option(
        PLAIN_TERMS, "terms of the chi-square, each at most once"
    )
    tags: TagUse = option(
        TagUse.MASK,
        "b scores: the two highest are the b candidates ('mask'), or not used",
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
