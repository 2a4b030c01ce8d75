"""The study: the one place that knows the order of the steps.

Takes: files, events or an event table, and a plan.
Gives: the event table, the result of the study and the hand-off folder.

It re-exports what notebooks and the command line need from the steps.
"""

from __future__ import annotations

from toprecon.events import (
    Binning,
    Branch,
    Channel,
    EventTable,
    Helicity,
    Observable,
    PairingClass,
    Status,
)
from toprecon.io import load_layout, open_events, write_events
from toprecon.study.chunks import (
    check_references,
    part_path,
    reconstruct_chunk,
    reconstruct_source,
)
from toprecon.study.cutting import Cutting, apply_cuts, passes_cut
from toprecon.study.handoff import HandOff, check_target, read_hand_off, write_hand_off
from toprecon.study.live import LiveStudy
from toprecon.study.plan import (
    OBSERVABLES,
    AngleOptions,
    BeamsOptions,
    CutOptions,
    Direction,
    Frame,
    StudyOptions,
    StudyPlan,
)
from toprecon.study.production import Produced, Recipe, content_checksum, produce
from toprecon.study.reconstruction import reconstruct
from toprecon.study.report import result_mapping, result_text, sentence_of
from toprecon.study.result import CAUTIONS, BeamsResult, StudyResult, finish
from toprecon.study.running import CHUNK_SIZE, run_study, summarise_chunk
from toprecon.study.sums import StudySums, merge, summarise
from toprecon.study.weights import SampleFactors, sample_factors

__all__ = [
    "CAUTIONS",
    "CHUNK_SIZE",
    "OBSERVABLES",
    "AngleOptions",
    "BeamsOptions",
    "BeamsResult",
    "Binning",
    "Branch",
    "Channel",
    "CutOptions",
    "Cutting",
    "Direction",
    "EventTable",
    "Frame",
    "HandOff",
    "Helicity",
    "LiveStudy",
    "Observable",
    "PairingClass",
    "Produced",
    "Recipe",
    "SampleFactors",
    "Status",
    "StudyOptions",
    "StudyPlan",
    "StudyResult",
    "StudySums",
    "apply_cuts",
    "check_references",
    "check_target",
    "content_checksum",
    "finish",
    "load_layout",
    "merge",
    "open_events",
    "part_path",
    "passes_cut",
    "produce",
    "read_hand_off",
    "reconstruct",
    "reconstruct_chunk",
    "reconstruct_source",
    "result_mapping",
    "result_text",
    "run_study",
    "sample_factors",
    "sentence_of",
    "summarise",
    "summarise_chunk",
    "write_events",
    "write_hand_off",
]
