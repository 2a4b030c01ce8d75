"""Layouts of files written by others."""

from __future__ import annotations

from pathlib import Path

SHOWERED = Path(__file__).with_name("showered.toml")
