"""Which collections of an EDM4hep file stand for what."""

from __future__ import annotations

import dataclasses
import re
from collections.abc import Callable, Iterable

from toprecon.errors import InputError, nearest
from toprecon.io.edm4hep_collections import (
    GENERATED,
    HEADER,
    IDENTIFICATION,
    PARAMETERS,
    RECO,
    Collections,
)
from toprecon.io.edm4hep_options import Edm4hepOptions, TagRule

PREFERRED = {
    "jets": ("RefinedVertexJets", "Jet", "Jets"),
    "particles": ("PandoraPFOs", "ReconstructedParticles"),
    "truth": ("MCParticles", "MCParticle", "Particle", "MCParticlesSkimmed"),
    "missing": ("MissingET",),
    "photons": ("Photon", "Photons", "IsolatedPhotons"),
}
"""Usual names of collections, tried in this order."""

_PATTERNS = {
    "jets": r"jets?(collection)?$",
    "particles": r"(pfos?|pflow|reconstructedparticles?(collection)?)$",
    "missing": r"^missing",
    "photons": r"^(iso(lated)?)?photons?$",
}
_LEPTONS = re.compile(
    r"^(iso(lated)?)?(electrons?|muons?|leptons?|lep)$", re.IGNORECASE
)
_CODES = {"electron": 11, "muon": 13}
_SCORE_NAME = re.compile(r"(tag|flavou?r|pid|prob).*_b$", re.IGNORECASE)


@dataclasses.dataclass(frozen=True)
class Choice:
    """Collections to read; empty for none.

    Parameters
    ----------
    jets, particles, photons, missing, truth, header, parameters : str
        Collections.
    leptons : tuple of str
        Collections of isolated leptons; empty to select them from the particles.
    tag : TagRule
        Where the b score is.
    notes : tuple of str
        What was found, in words.
    """

    jets: str
    leptons: tuple[str, ...]
    particles: str
    photons: str
    missing: str
    truth: str
    header: str
    parameters: str
    tag: TagRule
    notes: tuple[str, ...]


def choose_collections(file: Collections, options: Edm4hepOptions) -> Choice:
    """Choose the collections to read.

    Parameters
    ----------
    file : Collections
        Open file.
    options : Edm4hepOptions
        Names given by the user; they must exist.

    Returns
    -------
    Choice
        What to read.

    Raises
    ------
    InputError
        If a collection that was asked for is missing.
    """
    reco = [*file.of_kind(RECO), *file.subsets]
    generated = file.of_kind(GENERATED)

    def pick(role: str, among: Iterable[str], given: str) -> str:
        return _pick(file, role, list(among), given)

    # jets have relations of their own, so a subset will not do
    jets = pick("jets", file.of_kind(RECO), options.jets)
    taken = {jets}
    particles = pick(
        "particles", (c for c in reco if c not in taken), options.particles
    )
    if not particles and not options.particles and not jets:
        particles = next(iter(file.of_kind(RECO)), "")
    missing = pick("missing", (c for c in reco if c not in taken), options.missing)
    photons = pick("photons", (c for c in reco if c not in taken), options.photons)
    truth = pick("truth", generated, options.truth) or next(iter(generated), "")
    header = options.header or next(iter(file.of_kind(HEADER)), "")
    leptons = options.leptons
    for name in leptons:
        _require(name, reco, file, "leptons")
    if not leptons:
        leptons = tuple(sorted(name for name in reco if _LEPTONS.match(name)))
    tag = options.tag if _is_given(options.tag) else find_tag(file, jets)
    notes = [
        f"{role}: {name or 'none'}"
        for role, name in (
            ("jets", jets),
            ("leptons", ", ".join(leptons) or f"isolated ones of {particles}"),
            ("particles", particles),
            ("b score", describe_tag(tag)),
            ("truth", truth),
        )
    ]
    return Choice(
        jets,
        leptons,
        particles,
        photons,
        missing,
        truth,
        header,
        next(iter(file.of_kind(PARAMETERS)), ""),
        tag,
        ("collections: " + "; ".join(notes),),
    )


def _pick(file: Collections, role: str, among: list[str], given: str) -> str:
    """One collection for a role: as given, by its usual name, by its pattern."""
    if given:
        _require(given, among, file, role)
        return given
    for name in PREFERRED[role]:
        if name in among:
            return name
    if role in _PATTERNS:
        pattern = re.compile(_PATTERNS[role], re.IGNORECASE)
        return next((name for name in sorted(among) if pattern.search(name)), "")
    return ""


def _require(name: str, known: list[str], file: Collections, role: str) -> None:
    """Raise unless a collection exists."""
    if name not in known:
        msg = (
            f"{file.columns.path}: collection {name!r} is required for {role}, but is "
            f"missing{nearest(name, known)}"
        )
        raise InputError(msg)


def _is_given(rule: TagRule) -> bool:
    """Whether the user said where the b score is, or that there is none."""
    return bool(rule.collection) or rule.none


def find_tag(file: Collections, jets: str) -> TagRule:
    """Find the b score of the jets by the conventions in use.

    Parameters
    ----------
    file : Collections
        Open file.
    jets : str
        Collection of jets.

    Returns
    -------
    TagRule
        With ``none`` set if there is no score.

    Notes
    -----
    In this order: a collection of likelihoods per flavour with the code 5 (its name
    ends in ``_B``); a collection ``<jets>_HF_tags`` whose first parameter is a word of
    tag bits; identifications that the jets themselves point to, the same word.
    """
    found = file.of_kind(IDENTIFICATION)
    conventions: tuple[Callable[[], TagRule | None], ...] = (
        lambda: next(
            (
                TagRule(collection=name, field="likelihood", pdg=5)
                for name in found
                if _SCORE_NAME.search(name)
            ),
            None,
        ),
        lambda: next(
            (
                TagRule(collection=name, field="parameters", bit=0)
                for name in found
                if name == f"{jets}_HF_tags"
            ),
            None,
        ),
        lambda: _pointed_at(file, jets, found),
    )
    for convention in conventions:
        rule = convention()
        if rule is not None:
            return rule
    return TagRule(none=True)


def _pointed_at(file: Collections, jets: str, found: list[str]) -> TagRule | None:
    """Identifications that the jets point to (jets hold the range)."""
    if not jets or not file.has(jets, "particleIDs_begin"):
        return None
    branch = file.relation_branch(jets, "particleIDs")
    if not branch:
        return None
    likely = [name for name in found if name.startswith((jets, "ParticleID"))]
    return TagRule(collection=likely[0], field="parameters", bit=0) if likely else None


def describe_tag(rule: TagRule) -> str:
    """Return where the b score is, in words."""
    if rule.none:
        return "none"
    what = rule.field if rule.field == "likelihood" else f"parameter {rule.index}"
    bit = f", bit {rule.bit}" if rule.bit >= 0 else ""
    return f"{rule.collection}, {what}{bit}"


def lepton_code(collection: str) -> int:
    """Return the particle code that the name of a collection tells, 0 if none."""
    lower = collection.lower()
    return next((code for name, code in _CODES.items() if name in lower), 0)
