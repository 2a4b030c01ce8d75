"""From checked raw events to Events."""

from __future__ import annotations

import dataclasses
from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.events import TRUTH_MOMENTA, Sample, make_events, momenta, record_of
from toprecon.io.raw import (
    EXTRAS,
    FloatArray,
    RawEvents,
    RawHeaders,
    RawObjects,
    RawTruth,
)


def assemble(
    raw: RawEvents,
    keep: NDArray[np.bool_],
    *,
    ids: NDArray[np.uint64],
    rows: NDArray[np.int16],
    samples: tuple[Sample, ...],
    optional: frozenset[str],
) -> ak.Array:
    """Make Events of the entries that are kept.

    Parameters
    ----------
    raw : RawEvents
        One range of entries.
    keep : array of bool, shape (E,)
        Which entries are events.
    ids : array of uint64, shape (E,)
        Identities.
    rows : array of int16, shape (E,)
        Rows in ``samples``.
    samples : tuple of Sample
        Descriptions to attach.
    optional : frozenset of str
        Optional fields to make, filled with nothing where the file lacks them.

    Returns
    -------
    ak.Array
        Events.
    """
    if not keep.all():
        raw = _kept(raw, keep)
        ids, rows = ids[keep], rows[keep]
    n = len(raw)
    fields: dict[str, Any] = {}
    for name, extra in EXTRAS.items():
        if name in {"jets", "leptons"} or name in optional:
            objects = raw.objects.get(name) or RawObjects.none(n, extra)
            fields[name] = momenta(objects.p, objects.counts, **objects.extra)
    if "missing" in optional:
        fields["missing"] = momenta(_or_nan(raw.missing, n))
    if "truth" in optional:
        fields["truth"] = _truth_records(raw.truth, n)
    headers = raw.headers
    fields["weight"] = np.ascontiguousarray(headers.weight, dtype=np.float64)
    fields["sample"] = rows.astype(np.int16)
    fields["helicity"] = headers.helicity
    fields["sqrt_s"] = headers.sqrt_s
    fields["id"] = ids
    return make_events(fields, samples)


def _kept(raw: RawEvents, keep: NDArray[np.bool_]) -> RawEvents:
    """Drop the other entries."""

    def rows(value: Any) -> Any:
        return None if value is None else value[..., keep]

    headers = RawHeaders(
        **{
            field.name: rows(getattr(raw.headers, field.name))
            for field in dataclasses.fields(RawHeaders)
        }
    )
    truth = raw.truth
    if truth is not None:
        truth = RawTruth(
            {name: rows(p) for name, p in truth.p.items()},
            {name: rows(pdg) for name, pdg in truth.pdg.items()},
            rows(truth.sqrt_s_prime),
        )
    objects = {name: o.keep_events(keep) for name, o in raw.objects.items()}
    return RawEvents(headers, objects, rows(raw.missing), truth, {})


def _or_nan(p: FloatArray | None, n: int) -> FloatArray:
    """Momenta, or NaN for all events."""
    return np.full((4, n), np.nan) if p is None else p


def _truth_records(truth: RawTruth | None, n: int) -> ak.Array:
    """Return generated momenta as records; NaN where the file has none."""
    records: dict[str, Any] = {}
    for name in TRUTH_MOMENTA:
        extra = {}
        if name in TRUTH_MOMENTA[6:]:
            pdg = truth.pdg.get(name) if truth is not None else None
            extra["pdg"] = np.zeros(n, dtype=np.int32) if pdg is None else pdg
        p = None if truth is None else truth.p.get(name)
        records[name] = momenta(_or_nan(p, n), **extra)
    records["sqrt_s_prime"] = (
        np.full(n, np.nan) if truth is None else truth.sqrt_s_prime
    )
    return record_of(records)
