"""Speed of the generator."""

from __future__ import annotations

import time

import pytest

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
