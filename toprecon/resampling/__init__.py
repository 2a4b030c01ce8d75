"""Identities to random numbers.

Takes: 64-bit identities of events.
Gives: uniform words, Poisson replicas and halves, the same on any machine and in any
chunking.
"""

from __future__ import annotations

from toprecon.resampling.mixing import hash_text, mix64
from toprecon.resampling.replicas import in_half_a, replica_counts

__all__ = ["hash_text", "in_half_a", "mix64", "replica_counts"]
