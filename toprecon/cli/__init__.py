"""The ``toprecon`` command: the same studies without a notebook."""

from __future__ import annotations

from toprecon.cli.entry import main

__all__ = ["main"]
