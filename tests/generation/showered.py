"""Showered events shared by several tests, made once."""

from __future__ import annotations

import functools

import numpy as np

from toprecon.generation import GenerationOptions
from toprecon.generation.blocks import identities
from toprecon.generation.partons import draw_partons
from toprecon.generation.shower import shower_pairs

N = 600


@functools.lru_cache(maxsize=2)
def showered_sample(decays="lepton+jets"):
    """Return (options, partons, ids, particles) of some showered pairs."""
    options = GenerationOptions(
        simulation="shower", decays=decays, lepton_flavours=("e", "mu", "tau")
    )
    partons = draw_partons(np.random.default_rng(17), N, options)
    ids = identities("test", 1, 0, N)
    return options, partons, ids, shower_pairs(partons, ids, options)
