"""The binary tree that a sequential recombination makes of every event.

FastJet clusters; here its merging order becomes arrays over all events at once, so
that subjets, merging scales and declustering need no loop over particles.

A tree of N particles has 2 N - 1 nodes: the particles in the order given, then the
merged ones in the order of merging; the last node is the whole event.
"""

from __future__ import annotations

import dataclasses
import functools
import math
from enum import StrEnum
from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import ArrayLike, NDArray

from toprecon.errors import InputError, OptionError

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

EVERYTHING = 2 * math.pi
"""A radius [rad] at which generalised kT merges all particles of an event."""


class Sequence(StrEnum):
    """Order in which particles are merged; all of them end with a single jet.

    ``durham`` by min(E_i^2, E_j^2)(1 - cos), ``cambridge`` by angle alone,
    ``anti_kt`` by min(E_i^-2, E_j^-2)(1 - cos).
    """

    DURHAM = "durham"
    CAMBRIDGE = "cambridge"
    ANTI_KT = "anti_kt"


_POWER = {Sequence.CAMBRIDGE: 0.0, Sequence.ANTI_KT: -1.0}


@dataclasses.dataclass(frozen=True)
class History:
    """Merging trees of E events, as flat arrays over all their nodes.

    Parameters
    ----------
    counts : array of int, shape (E,)
        Particles per event.
    offsets : array of int, shape (E + 1,)
        First node of every event.
    left, right : array of int, shape (nodes,)
        The two nodes merged into this one; -1 for a particle.
    parent : array of int, shape (nodes,)
        The node this one was merged into; itself for the last of an event.
    p4 : array, shape (4, nodes)
        Momenta [GeV].
    """

    counts: IntArray
    offsets: IntArray
    left: IntArray
    right: IntArray
    parent: IntArray
    p4: FloatArray

    @property
    def root(self) -> IntArray:
        """Node of the whole event, shape (E,); -1 for an event without particles."""
        return np.where(self.counts > 0, self.offsets[1:] - 1, -1)

    @property
    def leaves(self) -> IntArray:
        """Nodes of the particles in the order given, shape (N,)."""
        return leaf_nodes(self.counts, self.offsets)

    def split(self, n: int) -> tuple[IntArray, FloatArray, IntArray]:
        """Undo the last mergings until n jets are left.

        Parameters
        ----------
        n : int
            Jets wanted; an event with fewer particles gives one jet per particle.

        Returns
        -------
        jet_index : array of int, shape (N,)
            Jet of every particle, by decreasing energy.
        p4 : array, shape (4, E, n)
            Momenta of the jets [GeV]; 0 where there are fewer.
        nodes : array of int, shape (E, n)
            Their nodes; -1 where there are fewer.
        """
        sizes = np.diff(self.offsets)
        event = np.repeat(np.arange(len(self.counts)), sizes)
        last = np.repeat(self.offsets[1:], sizes)
        index = np.arange(len(self.left))
        undone = (index >= last - (n - 1)) & (self.left >= 0)
        is_jet = ~undone & ((self.parent == index) | undone[self.parent])
        ancestor = climb(self.parent, is_jet | undone)
        jets = np.flatnonzero(is_jet)
        order = np.lexsort((-self.p4[0, jets], event[jets]))
        jets = jets[order]
        owner = event[jets]
        first = np.searchsorted(owner, np.arange(len(self.counts)))
        rank = np.arange(len(jets)) - first[owner]
        nodes = np.full((len(self.counts), n), -1, dtype=np.int64)
        nodes[owner, rank] = jets
        p4 = np.zeros((4, len(self.counts), n))
        p4[:, owner, rank] = self.p4[:, jets]
        rank_of_node = np.zeros(len(index), dtype=np.int64)
        rank_of_node[jets] = rank
        return rank_of_node[ancestor[self.leaves]], p4, nodes

    def merging_scale(self, n: int) -> FloatArray:
        """Return the Durham distance of the merging from n + 1 to n jets.

        Parameters
        ----------
        n : int
            Jets left after the merging.

        Returns
        -------
        array, shape (E,)
            2 min(E_i^2, E_j^2)(1 - cos) [GeV^2]; 0 for fewer than n + 1 particles.
        """
        exists = self.counts > n
        node = np.where(exists, self.offsets[1:] - n, 0)
        out = np.zeros(len(self.counts))
        node = node[exists]
        left, right = self.p4[:, self.left[node]], self.p4[:, self.right[node]]
        out[exists] = durham_distance(left, right)
        return out


def leaf_nodes(counts: ArrayLike, offsets: ArrayLike) -> IntArray:
    """Return the nodes of the particles, shape (N,)."""
    counts = np.asarray(counts, dtype=np.int64)
    starts = np.concatenate([[0], np.cumsum(counts)[:-1]]) if len(counts) else counts
    position = np.arange(int(counts.sum()))
    return position + np.repeat(np.asarray(offsets)[:-1] - starts, counts)


def climb(parent: IntArray, stops: NDArray[np.bool_]) -> IntArray:
    """Return the first node at or above each node that is a stop, shape (nodes,)."""
    # steps double, so the number of passes grows with the logarithm of the depth
    ancestor = np.where(stops, np.arange(len(parent)), parent)
    while True:
        further = ancestor[ancestor]
        if np.array_equal(further, ancestor):
            return ancestor
        ancestor = further


def durham_distance(p: ArrayLike, q: ArrayLike) -> FloatArray:
    """Return the Durham distance 2 min(E_i^2, E_j^2)(1 - cos theta_ij) [GeV^2].

    Parameters
    ----------
    p, q : array, shape (4, ...)
        Momenta [GeV].

    Returns
    -------
    array, shape (...)
        Distance [GeV^2].

    References
    ----------
    S. Catani, Yu. L. Dokshitzer, M. Olsson, G. Turnock, B. R. Webber,
    Phys. Lett. B 269 (1991) 432.
    """
    p, q = np.asarray(p, dtype=np.float64), np.asarray(q, dtype=np.float64)
    return 2.0 * np.minimum(p[0], q[0]) ** 2 * one_minus_cosine(p, q)


def one_minus_cosine(p: ArrayLike, q: ArrayLike) -> FloatArray:
    """Return 1 - cos of the opening angle; 0 for a momentum at rest."""
    # |u - v|^2 / 2 of the unit vectors does not cancel at small angles
    p, q = np.asarray(p, dtype=np.float64), np.asarray(q, dtype=np.float64)
    with np.errstate(invalid="ignore", divide="ignore"):
        u = p[1:] / np.sqrt(np.sum(p[1:] ** 2, axis=0))
        v = q[1:] / np.sqrt(np.sum(q[1:] ** 2, axis=0))
    return np.nan_to_num(0.5 * np.sum((u - v) ** 2, axis=0), nan=0.0)


def as_particles(p4: ArrayLike, counts: ArrayLike) -> tuple[FloatArray, IntArray]:
    """Check momenta (4, N) against particles per event (E,), and return both.

    Parameters
    ----------
    p4 : array, shape (4, N)
        Momenta E, px, py, pz [GeV].
    counts : array of int, shape (E,)
        Particles per event.

    Returns
    -------
    p4 : array, shape (4, N)
        In float64.
    counts : array, shape (E,)
        In int64.

    Raises
    ------
    InputError
        If the shapes disagree or a component is not finite.
    """
    momenta = np.asarray(p4, dtype=np.float64)
    numbers = np.asarray(counts, dtype=np.int64)
    if momenta.ndim != 2 or len(momenta) != 4 or momenta.shape[1] != numbers.sum():
        msg = (
            "particles: momenta of shape (4, N) with N = sum of counts are required; "
            f"got shape {momenta.shape} and counts that sum to {int(numbers.sum())}"
        )
        raise InputError(msg)
    if not np.all(np.isfinite(momenta)):
        msg = "particles: momenta must be finite; got NaN or infinity"
        raise InputError(msg)
    return momenta, numbers


@functools.cache
def _quiet_fastjet() -> Any:
    """Import FastJet without the banner it prints on the standard output."""
    import fastjet
    import fastjet._swig

    # its authors ask to be cited; the README says so in place of the banner
    fastjet._swig.ClusterSequence.set_fastjet_banner_stream(None)
    return fastjet


def fastjet_sequence(
    p4: FloatArray, counts: IntArray, *, radius: float | None, power: float
) -> Any:
    """Let FastJet cluster all events; Durham if the radius is None."""
    fastjet = _quiet_fastjet()
    offsets = np.zeros(len(counts) + 1, dtype=np.int64)
    np.cumsum(counts, out=offsets[1:])
    content: Any = ak.contents.RecordArray(
        [ak.contents.NumpyArray(np.ascontiguousarray(p4[i])) for i in (1, 2, 3, 0)],
        ["px", "py", "pz", "E"],
        parameters={"__record__": "Momentum4D"},
    )
    array = ak.Array(ak.contents.ListOffsetArray(ak.index.Index64(offsets), content))
    if radius is None:
        definition = fastjet.JetDefinition0Param(fastjet.ee_kt_algorithm)
    else:
        definition = fastjet.JetDefinition2Param(
            fastjet.ee_genkt_algorithm, radius, power
        )
    return fastjet.ClusterSequence(array, definition), definition


def cluster_history(
    p4: ArrayLike, counts: ArrayLike, sequence: Sequence = Sequence.DURHAM
) -> History:
    """Merge all particles of every event and return the trees.

    Parameters
    ----------
    p4 : array, shape (4, N)
        Momenta E, px, py, pz of all particles, event after event [GeV].
    counts : array of int, shape (E,)
        Particles per event; an event may be empty.
    sequence : Sequence
        Which pair is merged next. Momenta are added (E scheme).

    Returns
    -------
    History
        One tree per event.

    Raises
    ------
    OptionError
        If the sequence is unknown.
    InputError
        If a momentum is not finite or the shapes disagree.

    Notes
    -----
    FastJet gives the nodes of a tree in an order in which both branches come before
    their node. Counting +1 for a particle and -1 for a merging, the right branch ends
    just before its node and the left one at the last place with the same count.

    References
    ----------
    M. Cacciari, G. P. Salam, G. Soyez, Eur. Phys. J. C 72 (2012) 1896;
    arXiv:1111.6097, the e+e- algorithms.
    """
    p4, counts = as_particles(p4, counts)
    if sequence not in list(Sequence):
        known = ", ".join(Sequence)
        msg = f"sequence: must be one of {known}; got {sequence!r}"
        raise OptionError(msg)
    sizes = np.where(counts > 0, 2 * counts - 1, 0)
    offsets = np.zeros(len(counts) + 1, dtype=np.int64)
    np.cumsum(sizes, out=offsets[1:])
    n_nodes = int(offsets[-1])
    left = np.full(n_nodes, -1, dtype=np.int64)
    right = np.full(n_nodes, -1, dtype=np.int64)
    parent = np.arange(n_nodes, dtype=np.int64)
    filled = counts[counts > 0]
    if len(filled) == 0:
        return History(counts, offsets, left, right, parent, np.zeros((4, 0)))
    sequence = Sequence(sequence)
    radius = None if sequence is Sequence.DURHAM else EVERYTHING
    power = _POWER.get(sequence, 1.0)
    # both are kept until the results are read: FastJet holds references to them
    clustering, definition = fastjet_sequence(p4, filled, radius=radius, power=power)
    order = clustering.unique_history_order()
    nodes = ak.flatten(clustering.jets())
    momenta = np.stack([ak.to_numpy(nodes[k]) for k in ("E", "px", "py", "pz")])
    local = ak.to_numpy(ak.flatten(order))
    del definition
    if len(local) != n_nodes + len(filled) or momenta.shape[1] != n_nodes:
        msg = "particles: FastJet did not merge every event into one jet"
        raise InputError(msg)
    event = np.repeat(np.arange(len(filled)), 2 * filled)
    # the last entry of an event is the merging of its only jet with the beam
    keep = local < 2 * filled[event] - 1
    local, event = local[keep], event[keep]
    start = offsets[:-1][counts > 0]
    node = local + start[event]
    is_merging = local >= filled[event]
    height = np.cumsum(np.where(is_merging, -1, 1)) - event
    key = event * (int(filled.max()) + 2) + height
    by_height = np.argsort(key, kind="stable")
    previous = np.empty(n_nodes, dtype=np.int64)
    previous[by_height[1:]] = by_height[:-1]
    places = np.flatnonzero(is_merging)
    left[node[places]] = node[previous[places]]
    right[node[places]] = node[places - 1]
    parent[left[node[places]]] = node[places]
    parent[right[node[places]]] = node[places]
    return History(counts, offsets, left, right, parent, momenta)
