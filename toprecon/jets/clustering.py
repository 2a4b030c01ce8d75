"""Jets of many events at once: Durham and generalised kT for e+e- collisions.

Which to use: :func:`cluster_durham` for a fixed number of jets that takes up all
particles; :func:`cluster_generalised_kt` for another weight of the energies or for
jets of a limited radius that leave particles out.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import awkward as ak
import numpy as np
from numpy.typing import ArrayLike

from toprecon.errors import OptionError
from toprecon.jets.history import (
    FloatArray,
    IntArray,
    Sequence,
    as_particles,
    cluster_history,
    fastjet_sequence,
)


class Jets(NamedTuple):
    """Jets of many events as flat arrays.

    Parameters
    ----------
    p4 : array, shape (4, J)
        Momenta of all jets, event after event, by decreasing energy [GeV].
    counts : array of int, shape (E,)
        Jets per event.
    jet_index : array of int, shape (N,)
        Jet within its event that a particle belongs to; -1 for none.
    scales : array, shape (E, 2)
        Durham distances [GeV^2] at which n + 1 jets became n, and n became n - 1;
        NaN where jets are limited by a radius or there were too few particles.
    """

    p4: FloatArray
    counts: IntArray
    jet_index: IntArray
    scales: FloatArray


def cluster_durham(p4: ArrayLike, counts: ArrayLike, n_jets: int) -> Jets:
    """Cluster every event into a fixed number of jets with the Durham algorithm.

    Parameters
    ----------
    p4 : array, shape (4, N)
        Momenta E, px, py, pz of all particles, event after event [GeV].
    counts : array of int, shape (E,)
        Particles per event.
    n_jets : int
        Jets per event; an event with fewer particles gets no jets.

    Returns
    -------
    Jets
        Unpacks to ``p4, counts, jet_index, scales``.

    Raises
    ------
    OptionError
        If fewer than one jet is asked for.

    References
    ----------
    S. Catani, Yu. L. Dokshitzer, M. Olsson, G. Turnock, B. R. Webber,
    Phys. Lett. B 269 (1991) 432.
    """
    _check_n_jets(n_jets)
    return _exclusive(*as_particles(p4, counts), n_jets, Sequence.DURHAM)


def cluster_generalised_kt(
    p4: ArrayLike,
    counts: ArrayLike,
    *,
    power: float = 1.0,
    radius: ArrayLike = 2 * math.pi,
    n_jets: int | None = None,
    minimum_energy: float = 0.0,
) -> Jets:
    """Cluster with the generalised kT algorithm for e+e- collisions.

    Distances are min(E_i^2p, E_j^2p)(1 - cos theta_ij)/(1 - cos R) between particles
    and E_i^2p to the beam; a radius R above pi lets nothing go to the beam.

    Parameters
    ----------
    p4 : array, shape (4, N)
        Momenta E, px, py, pz of all particles, event after event [GeV].
    counts : array of int, shape (E,)
        Particles per event.
    power : float
        The exponent p: 1 like kT, 0 like Cambridge, -1 like anti-kT.
    radius : float or array, shape (E,)
        R [rad], the same for all events or one for each; events are grouped by it.
    n_jets : int, optional
        Exclusive: exactly that many jets, an event that cannot give them gets none.
        Without: inclusive, all jets above the energy.
    minimum_energy : float
        Least energy of an inclusive jet [GeV].

    Returns
    -------
    Jets
        Unpacks to ``p4, counts, jet_index, scales``.

    Raises
    ------
    OptionError
        If a radius is not positive or fewer than one jet is asked for.

    References
    ----------
    M. Cacciari, G. P. Salam, G. Soyez, Eur. Phys. J. C 72 (2012) 1896;
    arXiv:1111.6097, the e+e- algorithms.
    """
    p4, counts = as_particles(p4, counts)
    if n_jets is not None:
        _check_n_jets(n_jets)
    radii = np.broadcast_to(np.asarray(radius, dtype=np.float64), counts.shape)
    if not np.all(radii > 0):
        msg = f"radius: must be > 0 rad; got {float(np.min(radii))!r}"
        raise OptionError(msg)
    event = np.repeat(np.arange(len(counts)), counts)
    jet_index = np.full(len(event), -1, dtype=np.int64)
    for value in np.unique(radii):
        # an exclusive jet needs enough particles; FastJet would stop at such an event
        chosen = (radii == value) & (counts >= (n_jets or 1))
        rows = chosen[event]
        if chosen.any():
            jet_index[rows] = _labels(
                p4[:, rows], counts[chosen], float(value), power, n_jets
            )
    return _from_labels(p4, counts, event, jet_index, n_jets, minimum_energy)


def _check_n_jets(n_jets: int) -> None:
    if n_jets < 1:
        msg = f"n_jets: at least 1 is required; got {n_jets!r}"
        raise OptionError(msg)


def _exclusive(
    p4: FloatArray, counts: IntArray, n_jets: int, sequence: Sequence
) -> Jets:
    """Undo the last mergings of the tree of every event."""
    history = cluster_history(p4, counts, sequence)
    jet_index, jets, _ = history.split(n_jets)
    enough = counts >= n_jets
    jet_index[~np.repeat(enough, counts)] = -1
    scales = np.full((len(counts), 2), np.nan)
    scales[:, 0] = np.where(enough, history.merging_scale(n_jets), np.nan)
    if n_jets > 1:
        scales[:, 1] = np.where(enough, history.merging_scale(n_jets - 1), np.nan)
    return Jets(
        jets[:, enough].reshape(4, -1),
        np.where(enough, n_jets, 0).astype(np.int64),
        jet_index,
        scales,
    )


def _labels(
    p4: FloatArray, counts: IntArray, radius: float, power: float, n_jets: int | None
) -> IntArray:
    """Jet of every particle as FastJet numbers them, shape (N,); -1 for none."""
    clustering, definition = fastjet_sequence(p4, counts, radius=radius, power=power)
    if n_jets is None:
        members = clustering.constituent_index(0.0)
    else:
        members = clustering.exclusive_jets_constituent_index(n_jets)
    del definition
    sizes = ak.num(members, axis=2)
    label = ak.to_numpy(ak.flatten(ak.local_index(members, axis=1), axis=None))
    flat_sizes = ak.to_numpy(ak.flatten(sizes))
    starts = np.concatenate([[0], np.cumsum(counts)[:-1]])
    per_event = ak.to_numpy(ak.sum(sizes, axis=1))
    place = ak.to_numpy(ak.flatten(members, axis=None)) + np.repeat(starts, per_event)
    labels = np.full(p4.shape[1], -1, dtype=np.int64)
    labels[place] = np.repeat(label, flat_sizes)
    return labels


def _from_labels(
    p4: FloatArray,
    counts: IntArray,
    event: IntArray,
    label: IntArray,
    n_jets: int | None,
    minimum_energy: float,
) -> Jets:
    """Add the momenta of every jet and number the jets by decreasing energy."""
    width = int(label.max()) + 1 if len(label) else 0
    slot = np.where(label >= 0, event * width + label, len(counts) * width)
    total = len(counts) * width
    sums: FloatArray = np.stack(
        [np.bincount(slot, weights=c, minlength=total + 1)[:total] for c in p4]
    )
    filled = np.bincount(slot, minlength=total + 1)[:total] > 0
    keep = filled & (sums[0] >= minimum_energy)
    jets = np.flatnonzero(keep)
    owner = jets // width if width else jets
    order = np.lexsort((-sums[0, jets], owner))
    jets, owner = jets[order], owner[order]
    per_event = np.bincount(owner, minlength=len(counts))
    if n_jets is not None:
        complete = (per_event == n_jets)[owner]
        jets, owner = jets[complete], owner[complete]
        per_event = np.bincount(owner, minlength=len(counts))
    first = np.cumsum(per_event) - per_event
    rank = np.full(total + 1, -1, dtype=np.int64)
    rank[jets] = np.arange(len(jets)) - first[owner]
    scales = np.full((len(counts), 2), np.nan)
    return Jets(sums[:, jets], per_event, rank[slot], scales)
