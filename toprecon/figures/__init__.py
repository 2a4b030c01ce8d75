"""Figures: step results and tables to matplotlib figures.

Takes: results of the steps, event tables and arrays. Gives: ``Figure`` objects drawn
without pyplot, ready to be shown or saved.

Every function fills a figure of its own or one that is given, so that a live view
draws into the same figure again.
"""

from __future__ import annotations

from toprecon.figures.angle import angle_figure
from toprecon.figures.budget import budget_figure
from toprecon.figures.cuts import cut_flow_figure, distribution_figure
from toprecon.figures.flips import flip_figure
from toprecon.figures.matrix import matrix_figure
from toprecon.figures.pairing import class_figure
from toprecon.figures.style import png

__all__ = [
    "angle_figure",
    "budget_figure",
    "class_figure",
    "cut_flow_figure",
    "distribution_figure",
    "flip_figure",
    "matrix_figure",
    "png",
]
