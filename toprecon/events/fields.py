"""Fields of Events and Tops, and the checks at the door.

Events is an awkward array with one record per event. ``truth`` holds one momentum
record per generated particle; a missing one is NaN in every component. What is
known of whole samples travels in ``events.attrs["samples"]`` and every event points
to its sample by the ``sample`` field.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import awkward as ak
import numpy as np

from toprecon.errors import InputError, MissingFieldError, nearest
from toprecon.events.samples import Sample

TRUTH_MOMENTA = (
    "top",
    "antitop",
    "w_plus",
    "w_minus",
    "b",
    "bbar",
    "w_plus_up",
    "w_plus_down",
    "w_minus_up",
    "w_minus_down",
)
"""Generated momenta: ``w_plus_down`` is the charged antilepton or anti-down-type
quark of the W+, ``w_minus_down`` the charged lepton or down-type quark of the W-,
``w_*_up`` the neutrino or up-type quark. The last four carry ``pdg``."""

EVENT_FIELDS = {
    "jets": "ragged (E, J) momenta with btag (0..1), track_charge, vertex_charge",
    "leptons": "ragged (E, L) momenta with charge, pdg, isolation",
    "particles": "optional, ragged (E, P): charge, kind, jet_index; without the lepton",
    "photons": "optional, ragged momenta",
    "missing": "optional, (E,) missing momentum",
    "truth": f"optional, (E,) records {', '.join(TRUTH_MOMENTA)} and sqrt_s_prime",
    "weight": "(E,) float64 generator weight",
    "sample": "(E,) int16 row in events.attrs['samples']",
    "helicity": "(E,) int8: -1 e-L e+R, +1 e-R e+L, 0 mixed",
    "sqrt_s": "(E,) float64 nominal collision energy [GeV]",
    "id": "(E,) uint64 identity",
}

TOPS_FIELDS = {
    "top": "(E,) momentum of the top",
    "antitop": "(E,) momentum of the antitop",
    "w_plus": "(E,) momentum of the W+",
    "w_minus": "(E,) momentum of the W-",
    "assignment": "(E, 6) int8 jets: b,q,q of the top, b,q,q of the antitop; -1 none",
    "hadronic_side": "(E,) int8: +1 top, -1 antitop, 0 both",
    "sign": "(E,) int8: +1 if the first candidate is the top as measured",
    "sign_share": "(E,) probability of that sign",
    "neutrino": "(E,) momentum, NaN without",
    "chi2": "(E,) of the best assignment",
    "gap": "(E,) second best minus best",
    "share": "(E,) normalised weight of the best",
    "n_assignments": "(E,) int16 assignments evaluated",
    "status": "(E,) uint8, see Status",
}

_REQUIRED = ("jets", "leptons", "weight", "sample", "helicity", "sqrt_s", "id")


def make_events(fields: dict[str, Any], samples: Sequence[Sample]) -> ak.Array:
    """Assemble Events from columns.

    Parameters
    ----------
    fields : dict
        Awkward or numpy arrays of length E by the names of :data:`EVENT_FIELDS`.
    samples : sequence of Sample
        Rows that the ``sample`` field points to.

    Returns
    -------
    ak.Array, shape (E,)
        Events.

    Raises
    ------
    InputError
        If the columns have different lengths.
    """
    lengths = {name: len(value) for name, value in fields.items()}
    if len(set(lengths.values())) > 1:
        msg = f"events: columns must have the same length; got {lengths}"
        raise InputError(msg)
    layouts = [
        value.layout if isinstance(value, ak.Array) else ak.contents.NumpyArray(value)
        for value in fields.values()
    ]
    record = ak.contents.RecordArray(layouts, list(fields), length=len(layouts[0]))
    return with_samples(ak.Array(record), samples)


def with_samples(events: ak.Array, samples: Sequence[Sample]) -> ak.Array:
    """Return the events with the sample descriptions attached."""
    rows = [sample.to_mapping() for sample in samples]
    return ak.Array(events.layout, attrs={**events.attrs, "samples": rows})


def samples_of(events: ak.Array) -> tuple[Sample, ...]:
    """Return the sample descriptions that travel with events.

    Parameters
    ----------
    events : ak.Array
        Events.

    Returns
    -------
    tuple of Sample
        Row i belongs to the events with ``sample == i``.

    Raises
    ------
    MissingFieldError
        If the events carry none.
    """
    rows = events.attrs.get("samples")
    if rows is None:
        msg = (
            "events: the descriptions of their samples are required in "
            "events.attrs['samples'], but are missing; attach them with "
            "toprecon.events.with_samples"
        )
        raise MissingFieldError(msg)
    return tuple(Sample.from_mapping(row) for row in rows)


def require_fields(array: ak.Array, names: Sequence[str], *, where: str) -> None:
    """Check that an array has fields.

    Parameters
    ----------
    array : ak.Array
        Events, jets or tops.
    names : sequence of str
        Fields needed.
    where : str
        Start of the message.

    Raises
    ------
    MissingFieldError
        If one is missing.
    """
    for name in names:
        if name not in array.fields:
            msg = f"{where}: field {name!r} is required{nearest(name, array.fields)}"
            raise MissingFieldError(msg)


def has_truth(events: ak.Array) -> np.ndarray:
    """Return which events have a generated pair, shape (E,) bool."""
    if "truth" not in events.fields:
        return np.zeros(len(events), dtype=bool)
    return np.isfinite(ak.to_numpy(events.truth.top.E)) & np.isfinite(
        ak.to_numpy(events.truth.antitop.E)
    )


def validate_events(events: ak.Array, *, where: str = "events") -> None:
    """Check the form of Events.

    Parameters
    ----------
    events : ak.Array
        What should be Events.
    where : str
        Start of the message.

    Raises
    ------
    MissingFieldError
        If a required field is missing.
    InputError
        If a weight or a jet or lepton component is not finite.
    """
    require_fields(events, _REQUIRED, where=where)
    samples_of(events)
    if not np.all(np.isfinite(ak.to_numpy(events.weight))):
        msg = f"{where}.weight: must be finite; got NaN or infinity"
        raise InputError(msg)
    for name in ("jets", "leptons"):
        objects = events[name]
        require_fields(objects, ("E", "px", "py", "pz"), where=f"{where}.{name}")
        for part in ("E", "px", "py", "pz"):
            if not np.all(np.isfinite(ak.to_numpy(ak.flatten(objects[part])))):
                msg = f"{where}.{name}.{part}: must be finite; got NaN or infinity"
                raise InputError(msg)


def concatenate_events(parts: Sequence[ak.Array]) -> ak.Array:
    """Join parts of the same samples, such as the chunks of one source.

    Parameters
    ----------
    parts : sequence of ak.Array
        Events with the same list of samples, each describing its own part (slices of
        one array describe the whole: join them with ``ak.concatenate``).

    Returns
    -------
    ak.Array
        All events, in order; entries and sums of weights of the samples are added.

    Raises
    ------
    InputError
        If there is no part, or they carry different samples or different fields.
    """
    if not parts:
        msg = "events: at least one part is required; got none"
        raise InputError(msg)
    first = parts[0]
    samples = samples_of(first)
    for part in parts[1:]:
        if part.fields != first.fields:
            msg = f"events: parts have different fields: {first.fields}, {part.fields}"
            raise InputError(msg)
        others = samples_of(part)
        if [s.name for s in others] != [s.name for s in samples]:
            msg = (
                "events: parts must carry the same list of samples; got "
                f"{[s.name for s in samples]} and {[s.name for s in others]}"
            )
            raise InputError(msg)
        samples = tuple(
            known.merged(new) for known, new in zip(samples, others, strict=True)
        )
    return with_samples(ak.concatenate(list(parts)), samples)
