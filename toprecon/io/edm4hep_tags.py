"""Numbers of EDM4hep jets, such as the b score, by the rules of the layout."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError, nearest
from toprecon.io.edm4hep_collections import IDENTIFICATION, Block, Collections
from toprecon.io.edm4hep_options import TagRule
from toprecon.io.generated import links
from toprecon.io.raw import FloatArray

IntArray = NDArray[np.int64]
_RANGE = ("particleIDs_begin", "particleIDs_end")


def tag_columns(file: Collections, jets: str, rule: TagRule) -> set[str]:
    """Return the columns that a rule reads.

    Parameters
    ----------
    file : Collections
        Open file.
    jets : str
        Collection of jets.
    rule : TagRule
        Where the score is.

    Returns
    -------
    set of str
        Columns.

    Raises
    ------
    InputError
        If the collection of the rule is missing or has no such member.
    """
    if rule.none or not jets:
        return set()
    known = file.of_kind(IDENTIFICATION)
    if rule.collection not in known:
        msg = (
            f"{file.columns.path}: collection {rule.collection!r} is required for the "
            f"jets, but is missing{nearest(rule.collection, known)}"
        )
        raise InputError(msg)
    names = {f"{rule.collection}.PDG", f"{rule.collection}.likelihood"}
    if rule.field != "likelihood":
        branch = file.vector_branch(rule.collection, "parameters", 0)
        if not branch:
            msg = (
                f"{file.columns.path}: parameters of {rule.collection!r} are required "
                "for the jets, but are not stored; use field = 'likelihood'"
            )
            raise InputError(msg)
        names |= {branch}
        names |= {f"{rule.collection}.parameters_{end}" for end in ("begin", "end")}
    branch = _link(file, rule.collection)
    if branch:
        names |= {f"{branch}.index", f"{branch}.collectionID"}
    branch = file.relation_branch(jets, "particleIDs")
    if branch:
        names |= {f"{branch}.index", f"{branch}.collectionID"}
        names |= {f"{jets}.{end}" for end in _RANGE}
    return names


def _link(file: Collections, collection: str) -> str:
    """Branch from an identification to its particle, empty if there is none."""
    name = f"_{collection}_particle"
    return name if f"{name}.index" in file.columns.types else ""


def tag_scores(
    block: Block, jets: str, rule: TagRule, counts: IntArray
) -> tuple[FloatArray, NDArray[np.bool_]]:
    """Return the b score of every jet.

    Parameters
    ----------
    block : Block
        Columns read.
    jets : str
        Collection of jets.
    rule : TagRule
        Where the score is.
    counts : array of int, shape (E,)
        Jets per event.

    Returns
    -------
    array, shape (J,)
        Scores; NaN for a jet without one, whose link is missing or dangling.
    array of bool, shape (E,)
        Where the members of the collection disagree in length.
    """
    scores = np.full(int(counts.sum()), np.nan)
    if rule.none:
        return scores, np.zeros(block.n, dtype=bool)
    size, values, bad = block.members(rule.collection, ("PDG", "likelihood"))
    entry_scores = (
        values["likelihood"].astype(np.float64)
        if rule.field == "likelihood"
        else _parameters(block, rule, size)
    )
    if rule.bit >= 0:
        word = np.where(np.isfinite(entry_scores), entry_scores, 0).astype(np.int64)
        found = ((word >> rule.bit) & 1).astype(np.float64)
        entry_scores = np.where(np.isfinite(entry_scores), found, np.nan)
    jet, entry = _pairs(block, jets, rule, size, counts)
    if rule.pdg:
        wanted = values["PDG"][entry] == rule.pdg
        jet, entry = jet[wanted], entry[wanted]
    # the first entry of a jet wins
    scores[jet[::-1]] = entry_scores[entry[::-1]]
    return scores, bad


def _parameters(block: Block, rule: TagRule, size: IntArray) -> FloatArray:
    """One parameter of every identification; NaN where it is not stored."""
    branch = block.file.vector_branch(rule.collection, "parameters", 0)
    stored = block.column(branch)
    assert stored.counts is not None
    counts, ranges, _ = block.members(
        rule.collection, ("parameters_begin", "parameters_end")
    )
    out = np.full(int(size.sum()), np.nan)
    if not np.array_equal(counts, size):
        return out
    begin = ranges["parameters_begin"].astype(np.int64) + rule.index
    end = ranges["parameters_end"].astype(np.int64)
    event = np.repeat(np.arange(block.n), size)
    good = (begin >= 0) & (begin < np.minimum(end, stored.counts[event]))
    offsets = np.cumsum(stored.counts) - stored.counts
    out[good] = stored.values[(begin + offsets[event])[good]]
    return out


def _pairs(
    block: Block, jets: str, rule: TagRule, size: IntArray, counts: IntArray
) -> tuple[IntArray, IntArray]:
    """Jets and their identifications, by whichever side holds the link."""
    file = block.file
    branch = _link(file, rule.collection)
    starts = np.cumsum(counts) - counts
    event = np.repeat(np.arange(block.n), size)
    if branch:
        relation = block.relation(branch)
        if np.array_equal(relation.counts, size):
            index = block.only_into(relation, jets)
            good = (index >= 0) & (index < counts[event])
            return (index + starts[event])[good], np.flatnonzero(good)
        return np.zeros(0, np.int64), np.zeros(0, np.int64)
    branch = file.relation_branch(jets, "particleIDs")
    if branch and file.has(jets, _RANGE[0]):
        relation = block.relation(branch)
        own, ranges, _ = block.members(jets, _RANGE)
        if np.array_equal(own, counts):
            index = block.only_into(relation, rule.collection)
            begin, end = ranges[_RANGE[0]], ranges[_RANGE[1]]
            return links(index, relation.counts, begin, end, counts, size)
    # no link at all: one entry per jet in the order of the jets
    same = (size == counts)[event]
    local = np.arange(len(event)) - np.repeat(np.cumsum(size) - size, size)
    return (local + starts[event])[same], np.flatnonzero(same)
