"""Beam polarisations."""

from __future__ import annotations

import pytest

from toprecon.treelevel import beam_fractions, polarised_terms


def test_fractions_follow_the_helicities_of_both_beams():
    # G. Moortgat-Pick et al., hep-ph/0507011, section 1.2
    assert beam_fractions(-1, 1) == (1.0, 0.0)
    assert beam_fractions(1, -1) == (0.0, 1.0)
    assert beam_fractions(-1, -1) == (0.0, 0.0)
    assert beam_fractions(-0.8, 0.3) == pytest.approx((0.585, 0.035))


def test_mix_at_500_gev():
    # evaluated independently
    first, second = polarised_terms(500, -0.8, 0.3), polarised_terms(500, 0.8, -0.3)
    assert float(first.total) == pytest.approx(940.48, abs=0.01)
    assert float(second.total) == pytest.approx(477.54, abs=0.01)
    assert float(first.asymmetry) == pytest.approx(0.3847, abs=1e-4)
    assert float(second.asymmetry) == pytest.approx(0.4605, abs=1e-4)


def test_polarisation_outside_its_range_is_refused():
    with pytest.raises(ValueError, match="positron_polarisation: must be between"):
        beam_fractions(0.8, 30)
