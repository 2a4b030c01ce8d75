"""Jet clustering and jet charge on plain arrays, many events at once.

Takes: momenta (4, N) of particles and their number per event.
Gives: jets with the particles in each, merging trees, jet charges.
"""

from __future__ import annotations

from toprecon.jets.charge import jet_charge
from toprecon.jets.clustering import Jets, cluster_durham, cluster_generalised_kt
from toprecon.jets.history import (
    EVERYTHING,
    History,
    Sequence,
    climb,
    cluster_history,
    durham_distance,
    one_minus_cosine,
)
from toprecon.jets.isolation import relative_isolation

__all__ = [
    "EVERYTHING",
    "History",
    "Jets",
    "Sequence",
    "climb",
    "cluster_durham",
    "cluster_generalised_kt",
    "cluster_history",
    "durham_distance",
    "jet_charge",
    "one_minus_cosine",
    "relative_isolation",
]
