"""Variations of the input: events as another detector would have seen them.

Random numbers depend on the identity of the event and the number of the object only,
so that a varied sample is the same in any chunking and shares all else with the
nominal one: differences have small, paired errors.
"""

from __future__ import annotations

from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.events import require_fields, samples_of, with_samples
from toprecon.options import Options, option
from toprecon.resampling import hash_text, mix64

FloatArray = NDArray[np.float64]

_COMPONENTS = ("E", "px", "py", "pz")
_MASK = (1 << 64) - 1
_SMALLEST_FACTOR = 0.05  # a Gaussian tail must not turn a jet round


class VariationOptions(Options):
    """Changes of jets, leptons and b scores; the default changes nothing."""

    jet_energy_scale: float = option(
        1.0, "factor on the four-momenta of jets and particles", above=0, step=0.005
    )
    jet_energy_smearing: float = option(
        0.0, "relative Gaussian resolution added to every jet", low=0, high=1, step=0.01
    )
    lepton_energy_scale: float = option(
        1.0, "factor on the four-momenta of leptons", above=0, step=0.005
    )
    btag_loss: float = option(
        0.0, "probability that the b score of a jet is set to 0", low=0, high=1
    )
    btag_shift: float = option(
        0.0, "added to every b score, which stays in [0, 1]", low=-1, high=1
    )
    seed: int = option(1, "seed of the random changes", low=0, high=2**32 - 1)


def vary(events: ak.Array, options: VariationOptions) -> ak.Array:
    """Return the events as a slightly different detector would have seen them.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events.
    options : VariationOptions
        What to change.

    Returns
    -------
    ak.Array, shape (E,)
        The same events in the same order; a stored missing momentum balances the
        changes. Truth, weights and identities stay.
    """
    require_fields(events, ("jets", "leptons", "id"), where="events")
    counts = ak.to_numpy(ak.num(events.jets))
    owner = np.repeat(ak.to_numpy(events.id), counts)
    number = ak.to_numpy(ak.flatten(ak.local_index(events.jets)))
    factor = np.full(len(owner), options.jet_energy_scale)
    if options.jet_energy_smearing:
        noise = _normals(owner, number, f"jet energy {options.seed}")
        smeared = 1 + options.jet_energy_smearing * noise
        factor = factor * np.maximum(smeared, _SMALLEST_FACTOR)
    jets = _scaled(events.jets, ak.unflatten(factor, counts))
    if options.btag_shift or options.btag_loss:
        score = ak.to_numpy(ak.flatten(jets.btag)) + options.btag_shift
        lost = _uniforms(owner, number, f"b score {options.seed}") < options.btag_loss
        score = np.where(lost, 0.0, np.clip(score, 0.0, 1.0))
        jets = ak.with_field(jets, ak.unflatten(score, counts), "btag")
    leptons = _scaled(events.leptons, options.lepton_energy_scale)
    out = ak.with_field(events, jets, "jets")
    out = ak.with_field(out, leptons, "leptons")
    if "particles" in events.fields:
        particles = _scaled(events.particles, options.jet_energy_scale)
        out = ak.with_field(out, particles, "particles")
    if "missing" in events.fields:
        missing = events.missing
        for name in _COMPONENTS:
            change = ak.sum(jets[name] - events.jets[name], axis=1) + ak.sum(
                leptons[name] - events.leptons[name], axis=1
            )
            missing = ak.with_field(missing, missing[name] - change, name)
        out = ak.with_field(out, missing, "missing")
    return with_samples(out, samples_of(events))


def _scaled(records: ak.Array, factor: Any) -> ak.Array:
    """Multiply four-momenta; other fields stay."""
    out = records
    for name in _COMPONENTS:
        out = ak.with_field(out, records[name] * factor, name)
    return out


def _uniforms(owner: NDArray[np.uint64], number: Any, salt: str) -> FloatArray:
    """Return one number in (0, 1) per object."""
    with np.errstate(over="ignore"):
        event = mix64(owner ^ mix64(hash_text(salt) & _MASK))
        bits = mix64(event + np.asarray(number).astype(np.uint64) + np.uint64(1))
    return ((bits >> np.uint64(11)).astype(np.float64) + 0.5) * 2.0**-53


def _normals(owner: NDArray[np.uint64], number: Any, salt: str) -> FloatArray:
    """Return one standard normal number per object."""
    from scipy.special import ndtri

    return np.asarray(ndtri(_uniforms(owner, number, salt)), np.float64)
