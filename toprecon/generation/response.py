"""Response of the detector to partons: every quark becomes one jet.

Good for a quick look. Gluon radiation and jet finding, which cause most wrong
pairings, are only in the shower chain.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.events import momenta
from toprecon.generation.partons import Partons
from toprecon.generation.response_options import ResponseOptions
from toprecon.generation.tags import (
    btag_score,
    charge_measurement,
    electric_charge,
)
from toprecon.generation.taus import decay_taus
from toprecon.kinematics import momentum

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
BoolArray = NDArray[np.bool_]
QUARKS = ("b", "bbar", "w_plus_up", "w_plus_down", "w_minus_up", "w_minus_down")
LEPTONS = ("w_plus_down", "w_minus_down")
B_CODES = {"b": 5, "bbar": -5}


class Objects(NamedTuple):
    """Reconstructed objects of many events, ragged arrays."""

    jets: ak.Array
    leptons: ak.Array


def respond(
    rng: np.random.Generator, partons: Partons, options: ResponseOptions
) -> Objects:
    """Turn partons into jets and leptons.

    Parameters
    ----------
    rng : numpy.random.Generator
        Random numbers.
    partons : Partons
        Generated pairs.
    options : ResponseOptions
        Resolutions, rates, purities.

    Returns
    -------
    Objects
        Jets and leptons by decreasing energy. Quarks and hadronic tau decays become
        jets, electrons and muons (also from taus) become leptons or are lost.
    """
    n = len(partons)
    p = np.stack([partons.momenta[name] for name in QUARKS], axis=-1)
    codes = np.stack(
        [np.full(n, B_CODES[x]) if x in B_CODES else partons.pdg[x] for x in QUARKS],
        axis=-1,
    )
    visible, codes = decay_taus(rng, p, codes)
    jet = (np.abs(codes) <= 5) | (np.abs(codes) == 15)
    jets = _respond_jets(rng, visible, codes, jet, options)
    slots = [QUARKS.index(name) for name in LEPTONS]
    leptons = _respond_leptons(rng, visible[..., slots], codes[:, slots], options)
    return Objects(jets, leptons)


def missing_momentum(jets: ak.Array, leptons: ak.Array, sqrt_s: float) -> ak.Array:
    """Return (sqrt(s), 0, 0, 0) minus the sum of the stored objects.

    Parameters
    ----------
    jets, leptons : ak.Array, ragged
        Objects of the events.
    sqrt_s : float
        Nominal collision energy [GeV].

    Returns
    -------
    ak.Array, shape (E,)
        Momentum records; the energy contains what was radiated along the beams.
    """
    parts = []
    for name in ("E", "px", "py", "pz"):
        total = ak.to_numpy(ak.sum(jets[name], axis=1)) + ak.to_numpy(
            ak.sum(leptons[name], axis=1)
        )
        parts.append((sqrt_s if name == "E" else 0.0) - total)
    return momenta(np.stack(parts))


def _respond_jets(
    rng: np.random.Generator,
    p: FloatArray,
    codes: IntArray,
    is_jet: BoolArray,
    options: ResponseOptions,
) -> ak.Array:
    """Smear, tag and order the jets."""
    n, slots = codes.shape
    noise = rng.standard_normal((6, n, slots))
    energy = np.maximum(p[0], 1e-3)
    resolution = np.hypot(
        options.jet_energy_stochastic / np.sqrt(energy), options.jet_energy_constant
    )
    # a jet keeps at least a tenth of its energy: the Gaussian has no negative tail
    scale = np.maximum(1 + resolution * noise[0], 0.1)
    smeared = tilt(p, options.jet_angle * noise[1], options.jet_angle * noise[2])
    smeared = smeared * scale
    charge = electric_charge(codes)
    columns = {
        "btag": btag_score(noise[3], codes, options),
        "track_charge": charge_measurement(
            noise[4], charge, options.track_charge_purity, width=0.2
        ),
        "vertex_charge": charge_measurement(
            noise[5],
            np.where(np.abs(codes) == 5, charge, 0.0),
            options.vertex_charge_purity,
            width=1.0,
        ),
    }
    return pack(smeared, is_jet, columns)


def _respond_leptons(
    rng: np.random.Generator, p: FloatArray, codes: IntArray, options: ResponseOptions
) -> ak.Array:
    """Find and measure electrons and muons."""
    shape = codes.shape
    u = rng.random((2, *shape))
    scale = 1 + options.lepton_resolution * rng.standard_normal(shape)
    isolation = rng.exponential(0.02, shape)
    is_lepton = np.isin(np.abs(codes), (11, 13)) & (u[0] < options.lepton_efficiency)
    sign = np.where(u[1] < options.lepton_charge_flip, -1, 1)
    pdg = codes * sign
    columns = {
        "charge": -np.sign(pdg).astype(np.float64),
        "pdg": pdg,
        "isolation": isolation,
    }
    return pack(p * np.maximum(scale, 0.1), is_lepton, columns)


def pack(p: FloatArray, keep: BoolArray, columns: dict[str, Any]) -> ak.Array:
    """Return the objects kept, by decreasing energy, as a ragged array.

    Parameters
    ----------
    p : array, shape (4, E, J)
        Momenta [GeV].
    keep : array of bool, shape (E, J)
        Which exist.
    columns : dict of array, shape (E, J)
        Further fields.

    Returns
    -------
    ak.Array, ragged (E, J)
        Momentum records.
    """
    order = np.argsort(np.where(keep, -p[0], np.inf), axis=1, kind="stable")
    ordered = np.take_along_axis(keep, order, axis=1)

    def flat(values: Any) -> Any:
        return np.take_along_axis(values, order, axis=1)[ordered]

    return momenta(
        np.stack([flat(c) for c in p]),
        np.count_nonzero(keep, axis=1),
        **{name: flat(values) for name, values in columns.items()},
    )


def tilt(p: FloatArray, first: FloatArray, second: FloatArray) -> FloatArray:
    """Turn momenta by two small angles perpendicular to them.

    Parameters
    ----------
    p : array, shape (4, ...)
        Momenta [GeV].
    first, second : array, shape (...)
        Angles [rad].

    Returns
    -------
    array, shape (4, ...)
        Same energy and absolute momentum.
    """
    size = np.maximum(momentum(p), 1e-300)
    x, y, z = p[1:] / size
    sign = np.copysign(1.0, z)
    a = -1.0 / (sign + z)
    b = x * y * a
    moved = np.stack(
        [
            x + first * (1 + sign * x * x * a) + second * b,
            y + first * sign * b + second * (sign + y * y * a),
            z - first * sign * x - second * y,
        ]
    )
    moved *= size / np.sqrt(np.sum(moved**2, axis=0))
    return np.concatenate([p[:1], moved])
