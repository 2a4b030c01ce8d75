"""Which of two fat jets is the top, from the charges of their particles."""

from __future__ import annotations

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.boosted.fatjets import FatJets, Particles
from toprecon.boosted.options import ChargeOptions
from toprecon.events import components, require_fields
from toprecon.kinematics import angle

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

CHARGES = ("vertex", "b_charge", "w_charge", "lepton_charge")
"""Charges of a fat jet, in the order of the weights of :class:`ChargeOptions`."""

_ELECTRON, _MUON = 3, 4
"""Values of ``particles.kind``."""


def fat_jet_charges(
    events: ak.Array, particles: Particles, fat_jets: FatJets, kappa: float
) -> FloatArray:
    """Charges of the two fat jets that tell a top from an antitop.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events; their jets have ``btag`` and ``vertex_charge``.
    particles : Particles
        Their particles; ``jet_index`` says which jet they belong to.
    fat_jets : FatJets
        Two fat jets per event.
    kappa : float
        Exponent of the energy shares.

    Returns
    -------
    array, shape (4, E, 2)
        Vertex charge of the jet with the highest b score in the fat jet; energy-
        weighted charge of that b jet; of the rest of the fat jet (the W); and of the
        electrons and muons in the b jet. 0 where there is no such jet or particle.

    Notes
    -----
    A top gives a b (charge -1/3) and a W+: the first two and the lepton are negative,
    the third is positive. Jet charge as in :func:`toprecon.jets.jet_charge`.
    """
    jet, vertex = _b_jets(events, fat_jets)
    n = len(events)
    fat = fat_jets.fat_index
    inside = fat >= 0
    event = particles.event
    slot = np.where(inside, 2 * event + fat, 2 * n)
    of_b = inside & (particles.jet_index >= 0)
    of_b &= particles.jet_index == jet[event, np.maximum(fat, 0)]
    energy = particles.p4[0]

    def sums(weights: FloatArray) -> FloatArray:
        total = np.bincount(slot, weights=weights, minlength=2 * n + 1)
        return total.astype(np.float64)

    def weighted(chosen: NDArray[np.bool_], among: NDArray[np.bool_]) -> FloatArray:
        total = sums(energy * among)[slot]
        share = np.divide(energy, total, out=np.zeros_like(energy), where=total > 0)
        value = np.where(chosen, particles.charge * share**kappa, 0.0)
        return sums(value)[: 2 * n].reshape(n, 2)

    lepton = of_b & np.isin(particles.kind, (_ELECTRON, _MUON))
    rest = inside & ~of_b
    return np.stack(
        [
            vertex,
            weighted(of_b, of_b),
            weighted(rest, rest),
            weighted(lepton, of_b),
        ]
    )


def _b_jets(events: ak.Array, fat_jets: FatJets) -> tuple[IntArray, FloatArray]:
    """Jet with the highest b score nearest to each fat jet, and its vertex charge."""
    require_fields(events.jets, ("btag", "vertex_charge"), where="events.jets")
    n = len(events)
    jet = np.full((n, 2), -1, dtype=np.int64)
    vertex = np.zeros((n, 2))
    counts = ak.to_numpy(ak.num(events.jets, axis=1)).astype(np.int64)
    flat = ak.flatten(events.jets, axis=1)
    if not len(flat):
        return jet, vertex
    owner = np.repeat(np.arange(n), counts)
    local = np.arange(len(owner)) - np.repeat(np.cumsum(counts) - counts, counts)
    p4 = components(flat)
    with np.errstate(invalid="ignore"):
        to_first = angle(p4, fat_jets.p4[:, owner, 0])
        side = (to_first > angle(p4, fat_jets.p4[:, owner, 1])).astype(np.int64)
    slot = 2 * owner + side
    btag = np.nan_to_num(ak.to_numpy(flat.btag).astype(np.float64), nan=-1.0)
    # ascending scores: the last one written is the highest
    order = np.argsort(btag, kind="stable")
    order = order[fat_jets.found[owner[order]]]
    jet.reshape(-1)[slot[order]] = local[order]
    charge = np.nan_to_num(ak.to_numpy(flat.vertex_charge).astype(np.float64))
    vertex.reshape(-1)[slot[order]] = charge[order]
    return jet, vertex


def charge_score(charges: FloatArray, options: ChargeOptions) -> FloatArray:
    """Log odds that the first fat jet is the top.

    Parameters
    ----------
    charges : array, shape (4, E, 2)
        From :func:`fat_jet_charges`.
    options : ChargeOptions
        Weights of the differences, first fat jet minus second.

    Returns
    -------
    array, shape (E,)
        Linear in the charges and odd under exchange of the fat jets. The probability
        is 1/(1 + exp(-score)) if the weights were calibrated.
    """
    weights = np.array([getattr(options, name) for name in CHARGES])
    difference = charges[:, :, 0] - charges[:, :, 1]
    return np.einsum("f,fe->e", weights, difference)


def fit_charge_weights(
    charges: FloatArray, first_is_top: NDArray[np.bool_], options: ChargeOptions
) -> ChargeOptions:
    """Fit the weights of the charges by logistic regression.

    Parameters
    ----------
    charges : array, shape (4, E, 2)
        From :func:`fat_jet_charges`.
    first_is_top : array of bool, shape (E,)
        Truth.
    options : ChargeOptions
        Gives kappa.

    Returns
    -------
    ChargeOptions
        With the fitted weights.

    References
    ----------
    D. R. Cox, J. R. Stat. Soc. B 20 (1958) 215 (logistic regression).
    """
    from scipy.optimize import minimize

    difference = charges[:, :, 0] - charges[:, :, 1]
    scale = np.maximum(np.std(difference, axis=1), 1e-12)
    signed = np.where(first_is_top, 1.0, -1.0) * difference / scale[:, None]

    def loss(weights: FloatArray) -> tuple[float, FloatArray]:
        score = weights @ signed
        value = float(np.mean(np.logaddexp(0.0, -score)))
        slope = -np.mean(signed / (1.0 + np.exp(np.clip(score, -50, 50))), axis=1)
        # a weak pull to 0 keeps the weights finite if the charges separate fully
        return value + 1e-4 * float(weights @ weights), slope + 2e-4 * weights

    fitted = minimize(loss, np.zeros(len(CHARGES)), jac=True, method="BFGS").x / scale
    return options.replace(
        **{name: float(w) for name, w in zip(CHARGES, fitted, strict=True)}
    )
