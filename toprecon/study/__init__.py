"""The study: the one place that knows the order of the steps.

Takes: files, events or an event table, and a plan.
Gives: the event table, the result of the study and the hand-off folder.

It re-exports what notebooks and the command line need from the steps.
"""

from __future__ import annotations

from toprecon.asymmetry import (
    BeamRun,
    EstimatorOptions,
    Keep,
    ScanAxis,
    ScanOptions,
)
from toprecon.events import (
    BEAMS,
    Binning,
    Branch,
    Channel,
    EventTable,
    Helicity,
    Observable,
    PairingClass,
    Status,
)
from toprecon.io import describe, load_layout, open_events, write_events
from toprecon.migration import UnfoldingOptions
from toprecon.selection import VariationOptions, vary
from toprecon.study.branching import (
    BranchComparison,
    BranchRow,
    branch_plan,
    compare_branches,
)
from toprecon.study.calibrating import (
    CalibratedPlan,
    CalibrationQuality,
    calibrate_plan,
)
from toprecon.study.chunks import (
    check_references,
    part_path,
    reconstruct_chunk,
    reconstruct_source,
)
from toprecon.study.closing import angle_linearity, closure_of, coupling_dependence
from toprecon.study.comparing import compare_plans
from toprecon.study.cutting import Cutting, apply_cuts, passes_cut
from toprecon.study.datalike import ANGLE, DataLike, data_like
from toprecon.study.handoff import HandOff, check_target, read_hand_off, write_hand_off
from toprecon.study.interpreting import bias_meaning, helicity_summary
from toprecon.study.live import LiveStudy
from toprecon.study.plan import (
    OBSERVABLES,
    AngleOptions,
    BeamsOptions,
    BranchChoice,
    CutOptions,
    Direction,
    Frame,
    StudyOptions,
    StudyPlan,
)
from toprecon.study.polarisation import PolarisationEffect
from toprecon.study.production import Produced, Recipe, produce
from toprecon.study.reconstruction import reconstruct
from toprecon.study.report import (
    budget_text,
    result_mapping,
    result_text,
    sentence_of,
)
from toprecon.study.result import CAUTIONS, BeamsResult, StudyResult, finish
from toprecon.study.running import CHUNK_SIZE, run_study, summarise_chunk
from toprecon.study.scanning import scan_cuts
from toprecon.study.storing import content_checksum
from toprecon.study.sums import StudySums, merge, summarise
from toprecon.study.tagging import TagQuality, tag_quality
from toprecon.study.tail import TailFraction, unmatched_from_tail
from toprecon.study.varying import (
    VariationShifts,
    check_variable,
    usual_variations,
    variation_shifts,
)
from toprecon.study.weights import SampleFactors, sample_factors

__all__ = [
    "ANGLE",
    "BEAMS",
    "CAUTIONS",
    "CHUNK_SIZE",
    "OBSERVABLES",
    "AngleOptions",
    "BeamRun",
    "BeamsOptions",
    "BeamsResult",
    "Binning",
    "Branch",
    "BranchChoice",
    "BranchComparison",
    "BranchRow",
    "CalibratedPlan",
    "CalibrationQuality",
    "Channel",
    "CutOptions",
    "Cutting",
    "DataLike",
    "Direction",
    "EstimatorOptions",
    "EventTable",
    "Frame",
    "HandOff",
    "Helicity",
    "Keep",
    "LiveStudy",
    "Observable",
    "PairingClass",
    "PolarisationEffect",
    "Produced",
    "Recipe",
    "SampleFactors",
    "ScanAxis",
    "ScanOptions",
    "Status",
    "StudyOptions",
    "StudyPlan",
    "StudyResult",
    "StudySums",
    "TagQuality",
    "TailFraction",
    "UnfoldingOptions",
    "VariationOptions",
    "VariationShifts",
    "angle_linearity",
    "apply_cuts",
    "bias_meaning",
    "branch_plan",
    "budget_text",
    "calibrate_plan",
    "check_references",
    "check_target",
    "check_variable",
    "closure_of",
    "compare_branches",
    "compare_plans",
    "content_checksum",
    "coupling_dependence",
    "data_like",
    "describe",
    "finish",
    "helicity_summary",
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
    "scan_cuts",
    "sentence_of",
    "summarise",
    "summarise_chunk",
    "tag_quality",
    "unmatched_from_tail",
    "usual_variations",
    "variation_shifts",
    "vary",
    "write_events",
    "write_hand_off",
]
