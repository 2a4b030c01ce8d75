"""Where the sample events of the repository are."""

from __future__ import annotations

from pathlib import Path

SAMPLES = Path(__file__).parents[1] / "sample_events"
