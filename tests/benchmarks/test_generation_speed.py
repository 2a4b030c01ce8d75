"""Speed of the generator."""

from __future__ import annotations

import time

import pytest

from tests.require import require
from toprecon.generation import GenerationOptions, generate


@pytest.mark.benchmark
@pytest.mark.parametrize("helicity", ["LR", "RL"])
@pytest.mark.parametrize("decays", ["lepton+jets", "all-hadronic"])
def test_generator_makes_twenty_thousand_events_per_second(helicity, decays):
    options = GenerationOptions(helicity=helicity, decays=decays)
    generate(4096, options, seed=1)
    start = time.process_time()
    generate(40_960, options, seed=1)
    rate = 40_960 / (time.process_time() - start)
    print(f"{decays} {helicity}: {rate:,.0f} events/s of one core")
    assert rate > 20_000


@pytest.mark.benchmark
@pytest.mark.parametrize("keep_particles", [False, True])
def test_whole_chain_makes_four_hundred_events_per_second(keep_particles):
    require("pythia8mc")
    options = GenerationOptions(simulation="shower", keep_particles=keep_particles)
    generate(256, options, seed=1)
    start = time.process_time()
    generate(1_024, options, seed=1)
    rate = 1_024 / (time.process_time() - start)
    print(f"shower, particles {keep_particles}: {rate:,.0f} events/s of one core")
    assert rate > 400
