"""From events and assignments to blocks of measurements for the fit.

Side A of a fit is always hadronic. In lepton+jets the assignment says by its missing
jets which candidate is the leptonic one; it becomes side B.
"""

from __future__ import annotations

import dataclasses
from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.errors import OptionError
from toprecon.events import Channel, Status, dense, require_fields
from toprecon.pairing.fit_model import Measured
from toprecon.pairing.fit_options import FitOptions

FloatArray = NDArray[np.float64]

_SIN_THETA_MIN = 1e-3  # along the beam the azimuth is free: bounds its resolution


@dataclasses.dataclass(frozen=True)
class FitInputs:
    """Events and assignments as rectangular arrays; F fits = E events times K.

    Parameters
    ----------
    jets : array, shape (4, E, J)
        Momenta [GeV]; NaN where absent.
    leptons : array, shape (4, E)
        First lepton of every event; NaN where absent. Empty for all-hadronic.
    sqrt_s : array, shape (E,)
        Collision energies [GeV].
    event_index : array, shape (F,)
        Event of every fit.
    jet_index : array, shape (F, 6)
        Jets of side A and side B; -1 none.
    leptonic_side : array of int8, shape (F,)
        +1 the top is leptonic, -1 the antitop, 0 neither.
    usable : array of bool, shape (F,)
        Whether all jets and the lepton are there.
    """

    jets: FloatArray
    leptons: FloatArray
    sqrt_s: FloatArray
    event_index: NDArray[np.intp]
    jet_index: NDArray[np.int64]
    leptonic_side: NDArray[np.int8]
    usable: NDArray[np.bool_]

    def measured(self, fits: NDArray[np.intp], options: FitOptions) -> Measured:
        """Gather the measurements of some usable fits.

        Parameters
        ----------
        fits : array of int, shape (B,)
            Which fits.
        options : FitOptions
            Resolutions.

        Returns
        -------
        Measured
            Values and resolutions; non-finite where the input is.
        """
        event = self.event_index[fits]
        leptonic = self.leptonic_side[fits[:1]].any()
        index = self.jet_index[fits, :4] if leptonic else self.jet_index[fits]
        p = self.jets[:, event[:, None], index].swapaxes(1, 2)
        if leptonic:
            p = np.concatenate([p, self.leptons[:, None, event]], axis=1)
        return _measured(p, self.sqrt_s[event], options, leptonic=bool(leptonic))


def prepare(
    events: ak.Array, assignment: Any, options: FitOptions, channel: Channel
) -> FitInputs:
    """Check the arguments of a fit and make them rectangular.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events.
    assignment : array of int, shape (E, 6) or (E, K, 6)
        Jets of the top (b, q, q) and of the antitop; -1 none.
    options : FitOptions
        Constraints.
    channel : Channel
        Decay channel.

    Returns
    -------
    FitInputs
        For F = E times K fits.

    Raises
    ------
    OptionError
        If the assignment has the wrong form, or the constraints do not suit the
        channel.
    """
    names = ("jets", "sqrt_s")
    leptonic = channel is Channel.LEPTON_JETS
    require_fields(events, names + ("leptons",) * leptonic, where="fit: events")
    if leptonic and not options.four_momentum:
        msg = (
            "fit.four_momentum: must be true for lepton+jets, whose neutrino is what "
            "the momentum balance leaves; got False; switch it on"
        )
        raise OptionError(msg)
    array = np.asarray(assignment)
    n = len(events)
    if (
        array.ndim not in {2, 3}
        or array.shape[0] != n
        or array.shape[-1] != 6
        or array.dtype.kind not in "iu"
    ):
        msg = (
            f"fit: assignment must be integers of shape ({n}, 6) or ({n}, K, 6), six "
            f"jets for each of the {n} events; got {array.dtype} of shape "
            f"{array.shape}; pass the assignment that pairing or matching returned"
        )
        raise OptionError(msg)
    index = array.reshape(-1, 6).astype(np.int64)
    event_index = np.repeat(np.arange(n), index.shape[0] // n if n else 0)
    counts = ak.to_numpy(ak.num(events.jets, axis=1)).astype(np.int64)
    present = index >= 0
    usable = np.all(index < counts[event_index, None], axis=1)
    side = np.zeros(len(index), dtype=np.int8)
    lepton = np.empty((4, 0))
    if leptonic:
        is_top = ~present[:, 1] & ~present[:, 2]
        is_antitop = ~present[:, 4] & ~present[:, 5]
        side = np.where(is_top, 1, -1).astype(np.int8)
        index = np.where(is_top[:, None], np.roll(index, 3, axis=1), index)
        usable &= (is_top ^ is_antitop) & np.all(index[:, :4] >= 0, axis=1)
        usable &= (ak.to_numpy(ak.num(events.leptons, axis=1)) > 0)[event_index]
        lepton = dense(events.leptons, 1)[:, :, 0]
        used = np.sort(index[:, :4], axis=1)
    else:
        usable &= np.all(present, axis=1)
        used = np.sort(index, axis=1)
    usable &= np.all(np.diff(used, axis=1) > 0, axis=1)
    return FitInputs(
        dense(events.jets, max(int(counts.max(initial=0)), 1)),
        lepton,
        ak.to_numpy(events.sqrt_s).astype(np.float64),
        event_index,
        index,
        side,
        usable,
    )


def _measured(
    p: FloatArray, sqrt_s: FloatArray, options: FitOptions, *, leptonic: bool
) -> Measured:
    """Parameters and resolutions from momenta of shape (4, O, B)."""
    kinds = [options.b_jet, options.jet, options.jet, options.b_jet]
    values = np.empty((p.shape[1], 3, p.shape[2]))
    sigma = np.empty_like(values)
    with np.errstate(all="ignore"):
        transverse = np.sqrt(p[1] ** 2 + p[2] ** 2)
        size = np.sqrt(transverse**2 + p[3] ** 2)
        values[:, 0] = p[0]
        values[:, 1] = np.arctan2(transverse, p[3])
        values[:, 2] = np.arctan2(p[2], p[1])
        for i in range(p.shape[1]):
            if leptonic and i == 4:
                sigma[i, 0] = options.lepton.energy_error(values[i, 0])
                sigma[i, 1] = options.lepton.angle_error(values[i, 0])
                continue
            kind = kinds[i] if i < 4 else options.jet
            values[i, 0] /= kind.response
            sigma[i, 0] = kind.energy_error(values[i, 0])
            sigma[i, 1] = kind.angle_error(values[i, 0])
        sigma[:, 2] = sigma[:, 1] / np.maximum(np.sin(values[:, 1]), _SIN_THETA_MIN)
        velocity = np.where(size > 0, size / p[0], np.nan)
    return Measured(values, sigma, velocity, sqrt_s)


def finite_fits(measured: Measured) -> NDArray[np.bool_]:
    """Return which fits of a block have finite, positive energies and directions."""
    with np.errstate(all="ignore"):
        good: NDArray[np.bool_] = (
            np.all(np.isfinite(measured.values), axis=(0, 1))
            & np.all(np.isfinite(measured.sigma), axis=(0, 1))
            & np.all(np.isfinite(measured.velocity), axis=0)
            & np.all(measured.values[:, 0] > 0, axis=0)
            & np.isfinite(measured.sqrt_s)
            & (measured.sqrt_s > 0)
        )
    return good


def first_status(inputs: FitInputs) -> NDArray[np.uint8]:
    """Return the status of every fit before it is tried, shape (F,)."""
    return np.where(inputs.usable, Status.NOT_CONVERGED, Status.TOO_FEW_OBJECTS).astype(
        np.uint8
    )
