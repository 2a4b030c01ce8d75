"""Tests of reading and writing event files."""

from __future__ import annotations
