"""Soft drop: removal of soft wide-angle radiation from a jet, in e+e- measures."""

from __future__ import annotations

import dataclasses
import math

import numpy as np
from numpy.typing import NDArray

from toprecon.jets import History, climb, one_minus_cosine

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]


@dataclasses.dataclass(frozen=True)
class Groomed:
    """Groomed jets.

    Parameters
    ----------
    p4 : array, shape (4, F)
        Momenta of the groomed jets [GeV]; 0 for a jet without particles.
    node : array of int, shape (F,)
        Node of the tree that is left.
    z : array, shape (F,)
        Energy share of the softer branch of the splitting that passed; NaN if none.
    theta : array, shape (F,)
        Opening angle of that splitting [rad]; NaN if none.
    kept : array of bool, shape (K,)
        Which particles are left.
    """

    p4: FloatArray
    node: IntArray
    z: FloatArray
    theta: FloatArray
    kept: NDArray[np.bool_]


def soft_drop(
    history: History,
    *,
    z_cut: float = 0.1,
    beta: float = 0.0,
    radius: float = math.pi / 2,
) -> Groomed:
    """Undo the mergings of jets until a splitting is hard enough.

    From the last merging on, the branch with less energy is dropped unless
    min(E_1, E_2)/(E_1 + E_2) > z_cut [(1 - cos theta_12)/(1 - cos R_0)]^(beta/2).
    With R_0 = pi/2 the bracket is sqrt(2) sin(theta_12/2) to the power beta, the form
    used for hemispheres. beta = 0 removes soft branches at any angle.

    Parameters
    ----------
    history : History
        Trees of the jets, angular ordered (Cambridge).
    z_cut : float
        Least energy share of the softer branch at the angle R_0.
    beta : float
        Exponent of the angle.
    radius : float
        R_0 [rad].

    Returns
    -------
    Groomed
        A jet with no such splitting is left with the particle at the end of its
        hardest branch.

    References
    ----------
    A. J. Larkoski, S. Marzani, G. Soyez, J. Thaler, JHEP 05 (2014) 146;
    arXiv:1402.2657, eq. 1.1, with energies and opening angles in place of transverse
    momenta and distances.
    """
    node = history.root.copy()
    filled = node >= 0
    z = np.full(len(node), np.nan)
    theta = np.full(len(node), np.nan)
    active = np.flatnonzero(filled)
    active = active[history.left[node[active]] >= 0]
    scale = 1.0 - math.cos(radius)
    while len(active):
        left, right = history.left[node[active]], history.right[node[active]]
        p, q = history.p4[:, left], history.p4[:, right]
        share = np.minimum(p[0], q[0]) / (p[0] + q[0])
        opening = one_minus_cosine(p, q)
        passed = share > z_cut * (opening / scale) ** (0.5 * beta)
        done = active[passed]
        z[done] = share[passed]
        # half-angle form of arccos(1 - x), exact for small angles
        theta[done] = 2.0 * np.arcsin(np.sqrt(np.minimum(0.5 * opening[passed], 1.0)))
        harder = np.where(p[0] >= q[0], left, right)
        active, harder = active[~passed], harder[~passed]
        node[active] = harder
        active = active[history.left[harder] >= 0]
    p4 = np.zeros((4, len(node)))
    p4[:, filled] = history.p4[:, node[filled]]
    return Groomed(p4, node, z, theta, below(history, node))


def below(history: History, node: IntArray) -> NDArray[np.bool_]:
    """Return which particles lie below the given node of their jet, shape (K,)."""
    owner = np.repeat(np.arange(len(history.counts)), history.counts)
    # nodes are numbered in the order of merging, so a node lies above all it holds
    stops = np.zeros(len(history.left), dtype=bool)
    stops[node[node >= 0]] = True
    stops[history.root[history.root >= 0]] = True
    found = climb(history.parent, stops)[history.leaves]
    return found == node[owner]
