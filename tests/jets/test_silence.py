"""Nothing but our own text may reach the standard output of a command."""

from __future__ import annotations

import subprocess
import sys

import pytest

BEGIN = """
import threading
import numpy as np
from toprecon.jets import cluster_durham, cluster_generalised_kt, cluster_history
rng = np.random.default_rng(1)
p = rng.normal(size=(3, 40))
p4, counts = np.vstack([np.sqrt((p**2).sum(0) + 0.02), p]), np.array([20, 20])
"""
CALLS = {
    "durham": "cluster_durham(p4, counts, 4)",
    "generalised kt": "cluster_generalised_kt(p4, counts, radius=0.7)",
    "exclusive": "cluster_generalised_kt(p4, counts, power=0.0, n_jets=3)",
    "history": "cluster_history(p4, counts)",
    "threads": (
        "work = lambda: cluster_durham(p4, counts, 4)\n"
        "threads = [threading.Thread(target=work) for _ in range(4)]\n"
        "[t.start() for t in threads]\n"
        "[t.join() for t in threads]"
    ),
}


def _run(code):
    return subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True
    )


@pytest.mark.parametrize("call", CALLS.values(), ids=CALLS)
def test_clustering_prints_nothing(call):
    done = _run(BEGIN + call)
    assert done.stdout == ""
    assert done.stderr == ""


def test_the_banner_would_be_seen_here():
    """The test above can fail: FastJet by itself does print."""
    code = "from fastjet._swig import ClusterSequence as c; c.print_banner()"
    assert "FastJet" in _run(code).stdout
