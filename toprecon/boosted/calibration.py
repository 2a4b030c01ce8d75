"""Calibration of the charge sign on events with truth."""

from __future__ import annotations

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.boosted.charges import fat_jet_charges, fit_charge_weights
from toprecon.boosted.fatjets import FatJets, find_fat_jets, read_particles
from toprecon.boosted.options import BoostedOptions
from toprecon.errors import InputError
from toprecon.events import components, has_truth
from toprecon.kinematics import angle

_LEAST_EVENTS = 100
"""Fewer events with two-sided truth do not fix four weights to 10 %."""


def calibrate_charge(
    events: ak.Array, options: BoostedOptions | None = None
) -> BoostedOptions:
    """Fit the weights of the charges to all-hadronic events with truth.

    Events in which the generated b and antib are in different fat jets are used.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        All-hadronic signal events with particles.
    options : BoostedOptions, optional
        Clustering and kappa.

    Returns
    -------
    BoostedOptions
        With the fitted ``charge`` weights; ``sign_share`` is then a probability.

    Raises
    ------
    InputError
        If fewer than 100 events can be used.
    """
    options = options or BoostedOptions()
    particles = read_particles(events)
    sqrt_s = ak.to_numpy(events.sqrt_s).astype(np.float64)
    fat_jets = find_fat_jets(particles, sqrt_s, options)
    side, two_sided = true_b_sides(events, fat_jets)
    if two_sided.sum() < _LEAST_EVENTS:
        msg = (
            f"calibrate_charge: at least {_LEAST_EVENTS} events with the generated b "
            f"quarks in different fat jets are required; got {int(two_sided.sum())}"
        )
        raise InputError(msg)
    charges = fat_jet_charges(events, particles, fat_jets, options.charge.kappa)
    fitted = fit_charge_weights(
        charges[:, two_sided], side[two_sided] == 0, options.charge
    )
    return options.replace(charge=fitted)


def true_b_sides(
    events: ak.Array, fat_jets: FatJets
) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
    """Return which fat jet holds the generated b, and whether the antib is in the other.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events with truth.
    fat_jets : FatJets
        Their fat jets.

    Returns
    -------
    side : array of int, shape (E,)
        Fat jet 0 or 1 nearest to the b quark.
    two_sided : array of bool, shape (E,)
        Whether b and antib are nearest to different fat jets.
    """
    if not has_truth(events).any():
        return np.zeros(len(events), np.int64), np.zeros(len(events), dtype=bool)
    sides = []
    for name in ("b", "bbar"):
        p = components(events.truth[name])
        with np.errstate(invalid="ignore"):
            to_axis = angle(fat_jets.p4, p[:, :, None])
            sides.append((to_axis[:, 1] < to_axis[:, 0]).astype(np.int64))
    usable = fat_jets.found & has_truth(events)
    return sides[0], usable & (sides[0] != sides[1])
