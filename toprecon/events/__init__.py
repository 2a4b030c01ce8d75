"""Vocabulary: the nouns that every step takes or gives.

Events and Tops are awkward arrays with the fields listed in
:mod:`toprecon.events.fields`; the event table has one row per event. This folder
holds names, types, enumerations and validation, and no physics.
"""

from __future__ import annotations

from toprecon.events.arrays import components, dense, momenta, record_of
from toprecon.events.binning import Binning
from toprecon.events.cutflow import CutFlow
from toprecon.events.enums import (
    BEAMS,
    Branch,
    Channel,
    Helicity,
    PairingClass,
    Status,
)
from toprecon.events.fields import (
    EVENT_FIELDS,
    TOPS_FIELDS,
    TRUTH_MOMENTA,
    concatenate_events,
    has_truth,
    make_events,
    require_fields,
    samples_of,
    validate_events,
    with_samples,
)
from toprecon.events.observables import Observable, find_observable
from toprecon.events.samples import SIGNAL_PROCESS, Sample
from toprecon.events.table import COLUMNS, EventTable

__all__ = [
    "BEAMS",
    "COLUMNS",
    "EVENT_FIELDS",
    "SIGNAL_PROCESS",
    "TOPS_FIELDS",
    "TRUTH_MOMENTA",
    "Binning",
    "Branch",
    "Channel",
    "CutFlow",
    "EventTable",
    "Helicity",
    "Observable",
    "PairingClass",
    "Sample",
    "Status",
    "components",
    "concatenate_events",
    "dense",
    "find_observable",
    "has_truth",
    "make_events",
    "momenta",
    "record_of",
    "require_fields",
    "samples_of",
    "validate_events",
    "with_samples",
]
