"""Reconstruction studies of top pairs at e+e- colliders, in a notebook.

Names are imported on first use, so that ``import toprecon`` stays light.
"""

from __future__ import annotations

import importlib
from typing import Any

__version__ = "0.1.0"

_PUBLIC = {
    "EventTable": "toprecon.events",
    "MigrationMatrix": "toprecon.migration",
    "StudyPlan": "toprecon.study",
    "StudyResult": "toprecon.study",
    "generate": "toprecon.generation",
    "open_events": "toprecon.io",
    "reconstruct": "toprecon.study",
    "run_study": "toprecon.study",
}

__all__ = [
    "EventTable",
    "MigrationMatrix",
    "StudyPlan",
    "StudyResult",
    "__version__",
    "generate",
    "open_events",
    "reconstruct",
    "run_study",
]


def __getattr__(name: str) -> Any:
    """Import a public name on first use."""
    if name in _PUBLIC:
        return getattr(importlib.import_module(_PUBLIC[name]), name)
    msg = f"module 'toprecon' has no attribute {name!r}"
    raise AttributeError(msg)


def __dir__() -> list[str]:
    """Public names only."""
    return sorted(__all__)
