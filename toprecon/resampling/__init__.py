"""Identities to random numbers.

Takes: 64-bit identities of events.
Gives: uniform words, the same on any machine and in any chunking.
"""

from __future__ import annotations

from toprecon.resampling.mixing import hash_text, mix64

__all__ = ["hash_text", "mix64"]
