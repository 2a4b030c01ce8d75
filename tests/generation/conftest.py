"""Generated pairs shared by the tests of this folder."""

from __future__ import annotations

import numpy as np
import pytest

from toprecon.generation import GenerationOptions
from toprecon.generation.partons import draw_partons


def plain(helicity, **settings):
    """Options without radiation, spread and widths: the textbook process."""
    return GenerationOptions(
        helicity=helicity,
        radiation=False,
        energy_spread=0.0,
        finite_widths=False,
        **settings,
    )


@pytest.fixture(scope="session", params=["LR", "RL"])
def pairs(request):
    """100 000 pairs of the textbook process at 500 GeV: (options, partons)."""
    options = plain(request.param)
    return options, draw_partons(np.random.default_rng(71), 100_000, options)
