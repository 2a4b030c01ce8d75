"""The truth phase space: which generated events the measurement is about."""

from __future__ import annotations

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.events import Channel, components, has_truth
from toprecon.kinematics import mass
from toprecon.truth.matching import absolute_pdg, hadronic_sides
from toprecon.truth.options import TruthOptions

ELECTRON, MUON = 11, 13  # Monte Carlo numbering scheme, Review of Particle Physics


def signal_region(
    events: ak.Array,
    options: TruthOptions | None = None,
    *,
    channel: Channel = Channel.LEPTON_JETS,
) -> NDArray[np.bool_]:
    """Return which events lie inside the truth phase space.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events, with or without truth.
    options : TruthOptions, optional
        Gives the lowest mass of the generated pair.
    channel : Channel
        Lepton+jets: one W to quarks, the other to an electron or muon (a tau does not
        count, whatever it decays to). All-hadronic: both W to quarks.

    Returns
    -------
    array of bool, shape (E,)
        False without truth.
    """
    options = options or TruthOptions()
    if "truth" not in events.fields:
        return np.zeros(len(events), dtype=bool)
    top, antitop = hadronic_sides(events)
    if channel is Channel.ALL_HADRONIC:
        inside = top & antitop
    else:
        inside = (top & _light_lepton(events, "w_minus_down")) | (
            antitop & _light_lepton(events, "w_plus_down")
        )
    return inside & (sqrt_s_prime(events) >= options.minimum_sqrt_s_prime)


def sqrt_s_prime(events: ak.Array) -> NDArray[np.float64]:
    """Return the mass of the generated pair [GeV]; NaN without truth.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events with truth.

    Returns
    -------
    array, shape (E,)
        The stored value, or where none is stored the mass of top and antitop.
    """
    of_pair = mass(components(events.truth.top) + components(events.truth.antitop))
    if "sqrt_s_prime" not in events.truth.fields:
        return of_pair
    stored = ak.to_numpy(events.truth.sqrt_s_prime).astype(np.float64)
    return np.where(np.isfinite(stored), stored, of_pair)


def _light_lepton(events: ak.Array, name: str) -> NDArray[np.bool_]:
    """Whether a generated fermion is an electron or muon."""
    pdg = absolute_pdg(events, name)
    return has_truth(events) & ((pdg == ELECTRON) | (pdg == MUON))
