"""Figures: step results and tables to matplotlib figures.

Takes: results of the steps, event tables and arrays. Gives: ``Figure`` objects drawn
without pyplot, ready to be shown or saved.

Functions give a figure ready to be saved; most draw into a given one again. The
classes, ``AngleFigure`` and ``CutFigure``, keep their artists and follow a slider.
"""

from __future__ import annotations

from toprecon.figures.angle import AngleFigure, angle_figure, usual_variants
from toprecon.figures.boosted import branch_figure, fat_jet_figure, tag_figure
from toprecon.figures.budget import budget_figure
from toprecon.figures.closure import closure_figure
from toprecon.figures.comparison import comparison_figure
from toprecon.figures.cuts import (
    CutFigure,
    class_legend,
    cut_flow_figure,
    distribution_figure,
)
from toprecon.figures.datalike import data_like_figure, tail_figure
from toprecon.figures.event import EventObject, EventView, event_figure
from toprecon.figures.flips import flip_figure
from toprecon.figures.live import LiveFigure
from toprecon.figures.matrix import matrix_figure
from toprecon.figures.pairing import class_figure, purity_figure
from toprecon.figures.scan import scan_figure
from toprecon.figures.style import png

__all__ = [
    "AngleFigure",
    "CutFigure",
    "EventObject",
    "EventView",
    "LiveFigure",
    "angle_figure",
    "branch_figure",
    "budget_figure",
    "class_figure",
    "class_legend",
    "closure_figure",
    "comparison_figure",
    "cut_flow_figure",
    "data_like_figure",
    "distribution_figure",
    "event_figure",
    "fat_jet_figure",
    "flip_figure",
    "matrix_figure",
    "png",
    "purity_figure",
    "scan_figure",
    "tag_figure",
    "tail_figure",
    "usual_variants",
]
