"""FastJet's own contributed substructure through its array interface."""

from __future__ import annotations

import awkward as ak
import fastjet


def clustering(p4, counts, algorithm):
    """Cluster sequence of many jets, each with all its particles in one jet."""
    names = ("E", "px", "py", "pz")
    flat = ak.zip(dict(zip(names, p4, strict=True)), with_name="Momentum4D")
    definition = fastjet.JetDefinition(algorithm, 1.0)
    return fastjet.ClusterSequence(ak.unflatten(flat, counts), definition)
