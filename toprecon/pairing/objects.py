"""Jets, lepton and neutrino of events as plain arrays, grouped by number of jets."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator
from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.errors import MissingFieldError
from toprecon.events import Channel, Status, components, require_fields
from toprecon.pairing.hypotheses import FEWEST_JETS
from toprecon.pairing.neutrino import neutrino_momentum
from toprecon.pairing.options import MissingSource, PairingOptions

FloatArray = NDArray[np.float64]


@dataclasses.dataclass(frozen=True)
class Objects:
    """What the pairing needs of events.

    Parameters
    ----------
    offsets : array of int, shape (E + 1,)
        First jet of every event in the flat arrays.
    jets : array, shape (4, J)
        Jet momenta [GeV].
    btag : array, shape (J,)
        b scores.
    lepton, neutrino : array, shape (4, E)
        Most energetic lepton and neutrino [GeV]; NaN without.
    lepton_charge : array, shape (E,)
        +1 or -1, NaN without.
    sqrt_s : array, shape (E,)
        Collision energy [GeV].
    status : array of uint8, shape (E,)
        OK where all that the channel needs is there and finite.
    """

    offsets: NDArray[np.int64]
    jets: FloatArray
    btag: FloatArray
    lepton: FloatArray
    lepton_charge: FloatArray
    neutrino: FloatArray
    sqrt_s: FloatArray
    status: NDArray[np.uint8]

    def groups(self, cap: int) -> Iterator[tuple[NDArray[np.int64], NDArray[np.int64]]]:
        """Yield rows of events and the flat positions (E, n) of the jets considered.

        Parameters
        ----------
        cap : int
            Most jets considered: the most energetic ones, in stored order.

        Yields
        ------
        rows : array of int, shape (G,)
            Events of status OK with the same number n of jets considered.
        positions : array of int, shape (G, n)
            Where their jets are in the flat arrays.
        """
        counts = np.diff(self.offsets)
        usable = self.status == Status.OK
        for count in np.unique(counts[usable]):
            rows = np.flatnonzero(usable & (counts == count))
            positions = self.offsets[rows][:, None] + np.arange(count)
            if count > cap:
                order = np.argsort(-self.jets[0][positions], axis=1, kind="stable")
                positions = np.take_along_axis(
                    positions, np.sort(order[:, :cap], axis=1), axis=1
                )
            yield rows, positions


def read_objects(
    events: ak.Array, options: PairingOptions, channel: Channel
) -> Objects:
    """Return the plain arrays of events.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events.
    options : PairingOptions
        Says where the missing momentum comes from.
    channel : Channel
        Lepton+jets needs a lepton and four jets, all-hadronic six jets.

    Returns
    -------
    Objects
        With the status of events that cannot be paired set.
    """
    require_fields(events.jets, ("btag",), where="events.jets")
    counts = ak.to_numpy(ak.num(events.jets, axis=1)).astype(np.int64)
    offsets = np.concatenate([[0], np.cumsum(counts)])
    flat = ak.flatten(events.jets, axis=1)
    jets = components(flat)
    btag = ak.to_numpy(flat.btag).astype(np.float64)
    n = len(events)
    status = np.full(n, Status.OK, dtype=np.uint8)
    lepton = neutrino = np.full((4, n), np.nan)
    charge = np.full(n, np.nan)
    if channel is Channel.LEPTON_JETS:
        lepton, charge = leading_lepton(events)
        missing = missing_momentum(events, options.neutrino.source)
        method = options.neutrino.method
        neutrino = neutrino_momentum(lepton, missing, method, options.w_mass)
        known = np.isfinite(missing).all(axis=0) & np.isfinite(lepton).all(axis=0)
        with np.errstate(invalid="ignore"):
            none = ~(neutrino[0] > 0)
        status[~known] = Status.NON_FINITE
        status[known & none] = Status.NO_NEUTRINO
        none = ~np.isin(charge, (-1.0, 1.0))
        status[none] = Status.TOO_FEW_OBJECTS
    bad_jet = ~np.isfinite(jets).all(axis=0)
    status[np.repeat(np.arange(n), counts)[bad_jet]] = Status.NON_FINITE
    status[counts < FEWEST_JETS[channel]] = Status.TOO_FEW_OBJECTS
    return Objects(
        offsets=offsets,
        jets=jets,
        btag=btag,
        lepton=lepton,
        lepton_charge=charge,
        neutrino=neutrino,
        sqrt_s=ak.to_numpy(events.sqrt_s).astype(np.float64),
        status=status,
    )


def missing_momentum(events: ak.Array, source: MissingSource) -> FloatArray:
    """Return the momentum that is missing.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events.
    source : MissingSource
        ``objects``: what balances the stored jets, leptons and photons in a collision
        at rest with energy sqrt(s). ``stored``: the ``missing`` of the events.

    Returns
    -------
    array, shape (4, E)
        Missing energy and momentum [GeV]; the energy includes photons radiated along
        the beam, so a neutrino has E = |p|, not this energy.

    Raises
    ------
    MissingFieldError
        If the stored one is asked for and there is none.
    """
    if source is MissingSource.STORED:
        if "missing" not in events.fields:
            msg = (
                "events: field 'missing' is required by pairing.neutrino.source = "
                "'stored', but the events have none; set it to 'objects'"
            )
            raise MissingFieldError(msg)
        return components(events.missing)
    total: Any = np.zeros((4, len(events)))
    total[0] = ak.to_numpy(events.sqrt_s)
    for name in ("jets", "leptons", "photons"):
        if name in events.fields:
            for row, part in enumerate(("E", "px", "py", "pz")):
                total[row] -= ak.to_numpy(ak.sum(events[name][part], axis=1))
    return total


def leading_lepton(events: ak.Array) -> tuple[FloatArray, FloatArray]:
    """Return momentum and charge of the most energetic lepton, NaN without."""
    leptons = events.leptons
    require_fields(leptons, ("charge",), where="events.leptons")
    counts = ak.to_numpy(ak.num(leptons, axis=1))
    found = np.flatnonzero(counts > 0)
    momentum = np.full((4, len(events)), np.nan)
    charge = np.full(len(events), np.nan)
    if len(found):
        some = leptons[found]
        leading = ak.flatten(some[ak.argmax(some.E, axis=1, keepdims=True)], axis=1)
        momentum[:, found] = components(leading)
        charge[found] = np.sign(ak.to_numpy(leading.charge))
    return momentum, charge
