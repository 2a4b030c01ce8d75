from __future__ import annotations

import math

import pytest

from toprecon.asymmetry.meaning import (
    COUPLINGS,
    asymmetry_derivative,
    meaning_of,
)
from toprecon.statistics import Measured
from toprecon.treelevel import FormFactors, forward_backward_asymmetry

# Change of A_FB at 500 GeV, e-L e+R and e-R e+L, per +1 % of the Standard-Model value
# (F1) or per +0.01 (F2); own calculation with alpha = 1/127.95, sin^2 = 0.23155,
# m_t = 172.5 GeV.
SHIFTS = {
    "f1v_photon": (-0.00256, -0.00415, "relative"),
    "f1v_z": (-0.00058, 0.00081, "relative"),
    "f1a_z": (0.00314, 0.00335, "relative"),
    "f2v_photon": (-0.00560, -0.00931, "absolute"),
    "f2v_z": (-0.00370, 0.00540, "absolute"),
}
BEAMS = {"LR": (-1.0, 1.0), "RL": (1.0, -1.0)}


@pytest.mark.parametrize("name", SHIFTS)
@pytest.mark.parametrize(("column", "beams"), [(0, "LR"), (1, "RL")])
def test_derivatives_reproduce_known_sensitivities(name, column, beams):
    step = 0.01
    if SHIFTS[name][2] == "relative":
        step *= getattr(FormFactors.standard_model(), name)
    known = SHIFTS[name][column]
    helicity = {"LR": -1, "RL": 1}[beams]
    full_change = float(
        forward_backward_asymmetry(
            500, helicity, None, FormFactors().shifted(**{name: step})
        )
        - forward_backward_asymmetry(500, helicity)
    )
    assert full_change == pytest.approx(known, abs=1e-5)  # digits given
    # the response to a full step of 1 % is linear to about 1.5 %
    derivative = asymmetry_derivative(name, 500.0, *BEAMS[beams])
    assert derivative * step == pytest.approx(known, rel=0.02)


def test_a_bias_is_turned_into_errors_and_couplings():
    found = meaning_of(
        Measured(-0.1, 0.01),
        sqrt_s=500.0,
        polarisations=BEAMS["LR"],
        expected_error=0.005,
    )
    assert found.standard_deviations.value == pytest.approx(-20)
    assert found.standard_deviations.error == pytest.approx(2)
    axial = found.couplings["f1a_z"]
    # 0.00314 per 1 %: a bias of 0.1 fakes about 30 %
    assert abs(axial.relative) == pytest.approx(0.1 / 0.314, rel=0.01)
    assert axial.shift.value * axial.derivative == pytest.approx(-0.1)
    assert axial.shift.error == pytest.approx(abs(axial.shift.value) / 10)
    assert set(found.couplings) == set(COUPLINGS)
    assert math.isnan(found.couplings["f2v_z"].relative)  # 0 in the Standard Model
    assert "tree level without radiation" in found.caution


def test_missing_errors_and_energies_below_the_threshold_stay_missing():
    found = meaning_of(Measured(0.1, 0.01), sqrt_s=300.0, polarisations=(0, 0))
    assert math.isnan(found.standard_deviations.value)
    assert all(math.isnan(c.shift.value) for c in found.couplings.values())
