"""Particles for the tests of jets."""

from __future__ import annotations

import numpy as np
import pytest


def random_particles(rng, counts):
    """Massless and massive particles in random directions, shape (4, N)."""
    n = int(np.sum(counts))
    p = rng.normal(size=(3, n)) * rng.exponential(10.0, size=n)
    m = np.where(rng.random(n) < 0.5, 0.0, 0.13957)
    return np.concatenate([np.sqrt(np.sum(p**2, axis=0) + m**2)[None], p])


@pytest.fixture
def particles(rng):
    """Forty events of 0 to 60 particles: momenta and counts."""
    counts = np.concatenate([[0, 1, 2, 3], rng.integers(4, 60, size=36)])
    return random_particles(rng, counts), counts
