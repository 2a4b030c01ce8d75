"""The desk: controls and figures in a notebook.

It edits a plan and shows results; whatever it shows can be had from Python in one
line, and it says which. It knows the study and the figures, and holds no number of
its own.
"""

from __future__ import annotations

from toprecon.widgets.desk import Desk

__all__ = ["Desk"]
