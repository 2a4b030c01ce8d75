from __future__ import annotations

import numpy as np
import pytest

from toprecon.errors import OptionError
from toprecon.pairing.fit_options import FitOptions, JetResolution, LeptonResolution


def test_resolutions_add_in_quadrature():
    jet = JetResolution(
        energy_noise=3.0,
        energy_stochastic=0.5,
        energy_constant=0.04,
        angle_noise=2.0,
        angle_stochastic=0.1,
        angle_constant=0.01,
    )
    e = np.array([100.0])
    assert jet.energy_error(e)[0] == pytest.approx(np.sqrt(9 + 25 + 16))
    assert jet.angle_error(e)[0] == pytest.approx(np.sqrt(4e-4 + 1e-4 + 1e-4))
    lepton = LeptonResolution(energy_constant=0.03, energy_linear=4e-4, angle=0.002)
    assert lepton.energy_error(e)[0] == pytest.approx(5.0)
    assert lepton.angle_error(e)[0] == 0.002


def test_a_perfect_jet_is_refused():
    message = "one of the energy resolutions must be > 0; got only zeros"
    with pytest.raises(OptionError, match=message):
        JetResolution(angle_constant=0.01)
    with pytest.raises(OptionError, match="one of the angle resolutions must be > 0"):
        JetResolution(energy_constant=0.01)


def test_a_perfect_lepton_is_refused():
    with pytest.raises(OptionError, match="one of the energy resolutions must be > 0"):
        LeptonResolution(energy_constant=0.0, energy_linear=0.0)


def test_a_fit_without_constraints_is_refused():
    with pytest.raises(OptionError, match="at least one of four_momentum, w_masses"):
        FitOptions(four_momentum=False, w_masses=False, top_masses="free")


def test_options_survive_plain_data():
    options = FitOptions(top_masses="fixed", isr=False, w_width=1.5)
    assert FitOptions(**options.to_mapping()) == options


def test_a_negative_width_is_refused_with_unit():
    with pytest.raises(OptionError, match=r"w_width: must be >= 0 GeV; got -1"):
        FitOptions(w_width=-1)
