"""Selection: which events are worth reconstructing.

*Takes* Events. *Gives* a :class:`Selection`: for every event the step it fails first,
and the numbers the steps look at; no event is removed. :func:`vary` gives Events as a
slightly different detector would have seen them.
"""

from __future__ import annotations

from toprecon.selection.options import Requirements, SelectionOptions
from toprecon.selection.preselection import OBSERVABLES, Selection, select
from toprecon.selection.variations import VariationOptions, vary

__all__ = [
    "OBSERVABLES",
    "Requirements",
    "Selection",
    "SelectionOptions",
    "VariationOptions",
    "select",
    "vary",
]
