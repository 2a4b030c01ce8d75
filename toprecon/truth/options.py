"""Settings of the comparison with the generated particles."""

from __future__ import annotations

from toprecon.options import Options, option


class TruthOptions(Options):
    """When an event counts as matched, and when as signal."""

    match_angle: float = option(
        0.3,
        "largest angle between a quark and its jet in a matched event",
        unit="rad",
        above=0,
        high=3.2,
        step=0.01,
    )
    minimum_sqrt_s_prime: float = option(
        0.0,
        "lowest mass of the generated pair in the truth phase space",
        unit="GeV",
        low=0,
        step=10,
    )
