"""The desk: controls and figures in a notebook.

It edits a plan and shows results; whatever it shows can be had from Python in one
line, and it says which. It knows the study and the figures, and holds no number of
its own. Every panel also works alone: ``AnglePanel(files, plan)``.
"""

from __future__ import annotations

from toprecon.widgets.angle import AnglePanel
from toprecon.widgets.boosted import BoostedPanel
from toprecon.widgets.comparing import ComparePanel
from toprecon.widgets.cuts import CutsPanel
from toprecon.widgets.desk import Desk
from toprecon.widgets.event import EventPanel
from toprecon.widgets.events import EventsPanel
from toprecon.widgets.handing import HandOffPanel
from toprecon.widgets.migration import MigrationPanel
from toprecon.widgets.pairing import PairingPanel
from toprecon.widgets.scan import ScanPanel

__all__ = [
    "AnglePanel",
    "BoostedPanel",
    "ComparePanel",
    "CutsPanel",
    "Desk",
    "EventPanel",
    "EventsPanel",
    "HandOffPanel",
    "MigrationPanel",
    "PairingPanel",
    "ScanPanel",
]
