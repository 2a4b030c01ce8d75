"""From events to boosted pairs."""

from __future__ import annotations

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.boosted.charges import charge_score, fat_jet_charges
from toprecon.boosted.fatjets import FatJets, Particles, find_fat_jets, read_particles
from toprecon.boosted.observables import OBSERVABLES, SUBSTRUCTURE
from toprecon.boosted.options import Axis, BoostedOptions
from toprecon.boosted.substructure import Substructure, measure
from toprecon.boosted.tagging import passes_tag, tag_score
from toprecon.events import (
    Channel,
    Status,
    components,
    momenta,
    record_of,
    require_fields,
)
from toprecon.kinematics import angle

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

_BLOCK = 4000
"""Events treated at once: about 100 MB with 100 particles each."""


def find_tops(
    events: ak.Array,
    options: BoostedOptions | None = None,
    *,
    channel: Channel = Channel.LEPTON_JETS,
) -> ak.Array:
    """Reconstruct tops as fat jets.

    All particles are clustered into two fat jets, which are groomed and measured.
    Lepton+jets: the fat jet farther from the lepton is the hadronic top; the other one,
    the lepton and the missing momentum are the leptonic top; the lepton charge says
    which is which. All-hadronic: both fat jets are tops, and jet charges say which is
    which. The tag is an observable (``boosted.n_tagged``), not a condition.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events with ``particles``, which do not contain the isolated lepton.
    options : BoostedOptions, optional
        Clustering, grooming, tag and charges.
    channel : Channel
        Decay channel.

    Returns
    -------
    ak.Array, shape (E,)
        Tops with ``assignment`` -1, ``chi2``, ``gap`` and ``share`` NaN, the
        observables ``boosted.*``, and ``fat_jets``: the two fat jets before grooming,
        that of the top first. Momenta are NaN where the status is not OK:
        TOO_FEW_OBJECTS without two fat jets or a lepton, NON_FINITE for a particle or
        lepton that is not finite.

    Raises
    ------
    MissingFieldError
        If the events have no particles.
    """
    options = options or BoostedOptions()
    channel = Channel(channel)
    if "particles" not in events.fields or len(events) <= _BLOCK:
        return _find_block(events, options, channel)
    parts = [
        _find_block(events[start : start + _BLOCK], options, channel)
        for start in range(0, len(events), _BLOCK)
    ]
    return ak.concatenate(parts)


def fat_jet_table(
    events: ak.Array,
    options: BoostedOptions | None = None,
    *,
    channel: Channel = Channel.LEPTON_JETS,
) -> dict[str, FloatArray]:
    """Substructure of all fat jets that could be hadronic tops, one row per fat jet.

    What the tag is calibrated and its rates are measured with: the fat jet farther from
    the lepton in lepton+jets, both fat jets otherwise.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events with ``particles``.
    options : BoostedOptions, optional
        Clustering and grooming.
    channel : Channel
        Decay channel.

    Returns
    -------
    dict of array, shape (F,)
        Values by the names of the observables without ``boosted.``, and ``event``.
    """
    channel = Channel(channel)
    tops = find_tops(events, options, channel=channel)
    names = [name.removeprefix("boosted.") for name in tops.observables.fields]
    columns = {name: ak.to_numpy(tops.observables[f"boosted.{name}"]) for name in names}
    event = np.arange(len(events), dtype=np.float64)
    first = {"event": event, **{name: columns[name] for name in SUBSTRUCTURE}}
    good = np.isfinite(first["groomed_mass"])
    if channel is Channel.LEPTON_JETS:
        return {name: value[good] for name, value in first.items()}
    second = {
        "event": event,
        **{name: columns[f"second_{name}"] for name in SUBSTRUCTURE},
    }
    return {
        name: np.concatenate([first[name][good], second[name][good]]) for name in first
    }


def _find_block(
    events: ak.Array, options: BoostedOptions, channel: Channel
) -> ak.Array:
    particles = read_particles(events)
    sqrt_s = ak.to_numpy(events.sqrt_s).astype(np.float64)
    fat_jets = find_fat_jets(particles, sqrt_s, options)
    n = len(events)
    status = np.full(n, Status.OK, dtype=np.uint8)
    status[~fat_jets.found] = Status.TOO_FEW_OBJECTS
    status[~particles.is_finite] = Status.NON_FINITE
    if channel is Channel.LEPTON_JETS:
        return _lepton_jets(events, particles, fat_jets, status, options)
    return _all_hadronic(events, particles, fat_jets, status, options)


def _measure(
    particles: Particles, fat_index: IntArray, n_slots: int, options: BoostedOptions
) -> Substructure:
    """Substructure of the fat jets; ``fat_index`` numbers them, -1 for none."""
    order = np.argsort(fat_index, kind="stable")
    order = order[fat_index[order] >= 0]
    counts = np.bincount(fat_index[order], minlength=n_slots)
    return measure(particles.p4[:, order], counts, options.substructure)


def _lepton_jets(
    events: ak.Array,
    particles: Particles,
    fat_jets: FatJets,
    status: NDArray[np.uint8],
    options: BoostedOptions,
) -> ak.Array:
    lepton, charge = _leading_lepton(events)
    finite = np.isfinite(lepton).all(axis=0)
    has_lepton = np.isin(charge, (-1.0, 1.0))
    status[(status == Status.OK) & has_lepton & ~finite] = Status.NON_FINITE
    status[(status == Status.OK) & ~has_lepton] = Status.TOO_FEW_OBJECTS
    good = status == Status.OK
    n, row = len(events), np.arange(len(events))
    with np.errstate(invalid="ignore"):
        to_lepton = angle(fat_jets.p4, lepton[:, :, None])
        hadronic = (to_lepton[:, 1] > to_lepton[:, 0]).astype(np.int64)
    chosen = (fat_jets.fat_index == hadronic[particles.event]) & good[particles.event]
    found = _measure(particles, np.where(chosen, particles.event, -1), n, options)
    whole = fat_jets.p4[:, row, hadronic]
    jet = found.groomed if options.axis is Axis.GROOMED else whole
    other = fat_jets.p4[:, row, 1 - hadronic]
    neutrino = _missing_momentum(particles, lepton)
    leptonic_w = lepton + neutrino
    side = np.where(charge > 0, -1, 1).astype(np.int8)
    tops = _Pair(jet, other + leptonic_w, found.w, leptonic_w, whole, other)
    share = 2.0 * jet[0] / ak.to_numpy(events.sqrt_s)
    values = {**found.values, "energy_share": share}
    values |= {
        "n_tagged": passes_tag(values, options.tag).astype(np.float64),
        "score": tag_score(values, options.tag.likelihood),
        "energy": jet[0],
        "lepton_angle": to_lepton[row, hadronic],
    }
    return _tops(
        tops.ordered(side > 0),
        status,
        hadronic_side=side,
        sign=side,
        sign_share=np.ones(n),
        neutrino=neutrino,
        values=values,
    )


def _all_hadronic(
    events: ak.Array,
    particles: Particles,
    fat_jets: FatJets,
    status: NDArray[np.uint8],
    options: BoostedOptions,
) -> ak.Array:
    n = len(events)
    fat = fat_jets.fat_index
    slot = np.where(fat >= 0, 2 * particles.event + fat, -1)
    found = _measure(particles, slot, 2 * n, options)
    groomed = found.groomed.reshape(4, n, 2)
    jets = groomed if options.axis is Axis.GROOMED else fat_jets.p4
    w = found.w.reshape(4, n, 2)
    charges = fat_jet_charges(events, particles, fat_jets, options.charge.kappa)
    score = charge_score(charges, options.charge)
    first_is_top = score >= 0
    pair = _Pair(
        *(x[:, :, k] for x in (jets, w, fat_jets.p4) for k in (0, 1)),
    )
    per_jet = dict(found.values)
    per_jet["energy_share"] = (
        2.0 * jets[0] / ak.to_numpy(events.sqrt_s)[:, None]
    ).reshape(2 * n)
    tagged = passes_tag(per_jet, options.tag).reshape(n, 2)
    likelihood = tag_score(per_jet, options.tag.likelihood).reshape(n, 2)
    values = {}
    for k, prefix in enumerate(("", "second_")):
        for name in SUBSTRUCTURE:
            values[prefix + name] = per_jet[name].reshape(n, 2)[:, k]
    values |= {
        "n_tagged": tagged.sum(axis=1).astype(np.float64),
        "score": np.minimum(likelihood[:, 0], likelihood[:, 1]),
        "energy": jets[0, :, 0],
    }
    share = 1.0 / (1.0 + np.exp(-np.minimum(np.abs(score), 500)))
    values["sign_share"] = share
    return _tops(
        pair.ordered(first_is_top),
        status,
        hadronic_side=np.zeros(n, dtype=np.int8),
        sign=np.where(first_is_top, 1, -1).astype(np.int8),
        sign_share=share,
        neutrino=np.full((4, n), np.nan),
        values=values,
    )


class _Pair:
    """First and second candidate: momenta, W momenta and fat jets before grooming."""

    def __init__(self, *parts: FloatArray) -> None:
        self.parts = parts

    def ordered(self, first_is_top: NDArray[np.bool_]) -> list[FloatArray]:
        """Top, antitop, W+, W-, fat jet of the top, fat jet of the antitop."""
        out = []
        for first, second in zip(self.parts[::2], self.parts[1::2], strict=True):
            out.append(np.where(first_is_top, first, second))
            out.append(np.where(first_is_top, second, first))
        return out


def _tops(
    parts: list[FloatArray],
    status: NDArray[np.uint8],
    *,
    hadronic_side: NDArray[np.int8],
    sign: NDArray[np.int8],
    sign_share: FloatArray,
    neutrino: FloatArray,
    values: dict[str, FloatArray],
) -> ak.Array:
    """Assemble Tops; everything is NaN, or 0 for a sign, where the status is not OK."""
    n = len(status)
    good = status == Status.OK
    top, antitop, w_plus, w_minus, top_jet, antitop_jet = (
        np.where(good, p, np.nan) for p in parts
    )
    nothing = np.full(n, np.nan)
    observables = {
        item.name: np.where(
            good, values.get(item.name.removeprefix("boosted."), nothing), np.nan
        )
        for item in OBSERVABLES
    }
    fat_jets = np.stack([top_jet, antitop_jet], axis=-1).reshape(4, 2 * n)
    assignment = np.full((n, 6), -1, dtype=np.int8)
    return ak.Array(
        record_of(
            {
                "top": momenta(top),
                "antitop": momenta(antitop),
                "w_plus": momenta(w_plus),
                "w_minus": momenta(w_minus),
                "assignment": ak.Array(ak.contents.NumpyArray(assignment)),
                "hadronic_side": np.where(good, hadronic_side, np.int8(0)),
                "sign": np.where(good, sign, np.int8(0)),
                "sign_share": np.where(good, sign_share, np.nan),
                "neutrino": momenta(np.where(good, neutrino, np.nan)),
                "chi2": nothing,
                "gap": nothing,
                "share": nothing,
                "n_assignments": np.zeros(n, dtype=np.int16),
                "status": status,
                "observables": record_of(observables),
                "fat_jets": momenta(fat_jets, np.full(n, 2)),
            }
        )
    )


def _leading_lepton(events: ak.Array) -> tuple[FloatArray, FloatArray]:
    """Momentum and charge of the most energetic lepton, NaN without."""
    require_fields(events.leptons, ("charge",), where="events.leptons")
    momentum = np.full((4, len(events)), np.nan)
    charge = np.full(len(events), np.nan)
    found = np.flatnonzero(ak.to_numpy(ak.num(events.leptons, axis=1)) > 0)
    if len(found):
        some = events.leptons[found]
        leading = ak.flatten(some[ak.argmax(some.E, axis=1, keepdims=True)], axis=1)
        momentum[:, found] = components(leading)
        charge[found] = np.sign(ak.to_numpy(leading.charge))
    return momentum, charge


def _missing_momentum(particles: Particles, lepton: FloatArray) -> FloatArray:
    """Massless neutrino that balances particles and lepton, shape (4, E)."""
    n = len(particles.counts)
    event = particles.event
    total = np.stack(
        [np.bincount(event, weights=c, minlength=n) for c in particles.p4[1:]]
    )
    p = -(total + lepton[1:])
    return np.concatenate([np.sqrt(np.sum(p**2, axis=0))[None], p])
