"""The generated pair in a list of particles with parents and daughters.

Generators repeat a particle when it radiates. The chain of copies is followed both
ways: its last copy has the decay, its first copy is the particle as generated, before
gluon radiation, and gives the momentum. Missing links, dangling indices and cycles
leave a momentum absent (NaN); they never stop the reading.
"""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import NDArray

from toprecon.events import TRUTH_MOMENTA
from toprecon.io.raw import FloatArray, RawTruth

IntArray = NDArray[np.int64]
Mask = NDArray[np.bool_]

TOP, W, B = 6, 24, 5
_JUMPS = 24
"""Doublings when following copies: chains of up to 2^24 copies, and cycles end."""


@dataclasses.dataclass(frozen=True)
class GeneratedParticles:
    """Particles of all events, one after another, and who decays into whom.

    Parameters
    ----------
    pdg : array of int, shape (N,)
        Particle codes.
    p : array, shape (4, N)
        E, px, py, pz [GeV].
    counts : array of int, shape (E,)
        Particles per event.
    parent, daughter : array of int, shape (M,)
        Positions 0 .. N-1 of both ends of every link, within one event.
    """

    pdg: IntArray
    p: FloatArray
    counts: IntArray
    parent: IntArray
    daughter: IntArray

    @property
    def event(self) -> IntArray:
        """Event of every particle, shape (N,)."""
        return np.repeat(np.arange(len(self.counts)), self.counts)


def links(
    index: IntArray,
    index_counts: IntArray,
    begin: IntArray,
    end: IntArray,
    counts: IntArray,
    target_counts: IntArray | None = None,
) -> tuple[IntArray, IntArray]:
    """Return both ends of the links of a relation stored as ranges.

    Parameters
    ----------
    index : array of int, shape (R,)
        Targets within their event, all events one after another; negative is none.
    index_counts : array of int, shape (E,)
        Entries of ``index`` per event.
    begin, end : array of int, shape (N,)
        Range of each object in the entries of its event.
    counts : array of int, shape (E,)
        Objects per event.
    target_counts : array of int, shape (E,), optional
        Possible targets per event; by default the objects themselves.

    Returns
    -------
    source, target : array of int, shape (M,)
        Positions over all events. Ranges and targets out of bounds are left out.
    """
    target_counts = counts if target_counts is None else target_counts
    begin, end = begin.astype(np.int64), end.astype(np.int64)
    event = np.repeat(np.arange(len(counts)), counts)
    available = index_counts[event]
    good = (begin >= 0) & (begin <= end) & (end <= available)
    size = np.where(good, end - begin, 0)
    source = np.repeat(np.arange(len(begin)), size)
    first = np.repeat(np.cumsum(size) - size, size)
    offsets = np.cumsum(index_counts) - index_counts
    where = np.arange(len(source)) - first + (offsets[event] + begin)[source]
    target = index[where].astype(np.int64)
    inside = (target >= 0) & (target < target_counts[event[source]])
    starts = np.cumsum(target_counts) - target_counts
    return source[inside], (target + starts[event[source]])[inside]


def find_pair(particles: GeneratedParticles) -> RawTruth:
    """Find the generated pair and its decays.

    Parameters
    ----------
    particles : GeneratedParticles
        All events.

    Returns
    -------
    RawTruth
        NaN where an event has no such particle. The collision energy after
        initial-state radiation is the mass of the pair.
    """
    walk = _Walk(particles)
    found: dict[str, IntArray] = {}
    for top, w, b, sign in (
        ("top", "w_plus", "b", 1),
        ("antitop", "w_minus", "bbar", -1),
    ):
        last = walk.last_top(sign * TOP)
        found[top] = walk.first_copy(last)
        boson = walk.daughter(last, walk.pdg == sign * W)
        # no top, as in pairs of W: the first W of the event
        other = walk.first(walk.pdg == sign * W)
        boson = np.where((boson < 0) & (last < 0), other, boson)
        found[w] = boson
        found[b] = walk.daughter(last, walk.pdg == sign * B)
        # without a W in the record its decay products hang on the top
        decaying = np.where(boson >= 0, walk.last_copy(boson), last)
        odd = np.abs(walk.pdg) % 2 == 1
        fermion = (np.abs(walk.pdg) <= 5) | (
            (np.abs(walk.pdg) >= 11) & (np.abs(walk.pdg) <= 16)
        )
        is_up = fermion & ~odd & (np.sign(walk.pdg) == sign)
        is_down = fermion & odd & (np.sign(walk.pdg) == -sign)
        found[f"{w}_up"] = walk.daughter(decaying, is_up)
        found[f"{w}_down"] = walk.daughter(decaying, is_down)
    p = {name: walk.momenta(found[name]) for name in TRUTH_MOMENTA}
    for w in ("w_plus", "w_minus"):
        total = p[f"{w}_up"] + p[f"{w}_down"]
        p[w] = np.where(np.isnan(p[w]), total, p[w])
    pair = p["top"] + p["antitop"]
    square = pair[0] ** 2 - pair[1] ** 2 - pair[2] ** 2 - pair[3] ** 2
    prime = np.sqrt(np.maximum(square, 0.0))
    prime[np.isnan(square)] = np.nan
    pdg = {
        name: np.where(found[name] >= 0, walk.codes(found[name]), 0).astype(np.int32)
        for name in TRUTH_MOMENTA[6:]
    }
    return RawTruth(p, pdg, prime)


class _Walk:
    """Look-ups along the links; every result is a position per event, -1 for none."""

    def __init__(self, particles: GeneratedParticles) -> None:
        self.pdg = particles.pdg
        self.n_events = len(particles.counts)
        self._p = particles.p
        self._event = particles.event
        key = np.unique(particles.parent * len(self.pdg) + particles.daughter)
        self._parent, self._daughter = np.divmod(key, max(len(self.pdg), 1))
        same = self.pdg[self._parent] == self.pdg[self._daughter]
        n = len(self.pdg)
        self._next = np.arange(n)
        # the first link wins where a particle has several copies of itself
        self._next[self._parent[same][::-1]] = self._daughter[same][::-1]
        self._before = np.arange(n)
        self._before[self._daughter[same][::-1]] = self._parent[same][::-1]
        self._last = _ends(self._next)
        self._first = _ends(self._before)

    def momenta(self, where: IntArray) -> FloatArray:
        """Return momenta (4, E), NaN for none."""
        if not len(self.pdg):
            return np.full((4, self.n_events), np.nan)
        return np.where(where >= 0, self._p[:, where], np.nan)

    def codes(self, where: IntArray) -> IntArray:
        """Return particle codes, anything for none."""
        return self.pdg[where] if len(self.pdg) else np.zeros(len(where), np.int64)

    def first_copy(self, where: IntArray) -> IntArray:
        """Return the first copy of a particle."""
        return _follow(self._first, where)

    def last_copy(self, where: IntArray) -> IntArray:
        """Return the last copy of a particle."""
        return _follow(self._last, where)

    def last_top(self, code: int) -> IntArray:
        """Return the last copy of the top; one that decays before one that does not."""
        is_last = (self.pdg == code) & (self._next == np.arange(len(self.pdg)))
        decays = np.zeros(len(self.pdg), dtype=bool)
        child = np.abs(self.pdg[self._daughter])
        decays[self._parent[(child == W) | (child == B)]] = True
        best = self.first(is_last & decays)
        return np.where(best >= 0, best, self.first(is_last))

    def first(self, mask: Mask) -> IntArray:
        """Return the first marked particle of every event."""
        out = np.full(self.n_events, -1, dtype=np.int64)
        where = np.flatnonzero(mask)[::-1]
        out[self._event[where]] = where
        return out

    def daughter(self, parents: IntArray, wanted: Mask) -> IntArray:
        """Return the first wanted daughter of one parent per event."""
        is_parent = np.zeros(len(self.pdg), dtype=bool)
        is_parent[parents[parents >= 0]] = True
        use = is_parent[self._parent] & wanted[self._daughter]
        mask = np.zeros(len(self.pdg), dtype=bool)
        mask[self._daughter[use]] = True
        return self.first(mask)


def _ends(step: IntArray) -> IntArray:
    """Follow single steps to their end; -1 for what runs in a circle."""
    end = step
    for _ in range(_JUMPS):
        further = end[end]
        if np.array_equal(further, end):
            break
        end = further
    return np.where(step[end] == end, end, -1) if len(end) else end


def _follow(table: IntArray, where: IntArray) -> IntArray:
    """Look up positions, keeping -1."""
    if not len(table):
        return where
    return np.where(where >= 0, table[where], -1)
