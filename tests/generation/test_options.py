"""Settings of the generator."""

from __future__ import annotations

import pytest

from toprecon.events import Helicity
from toprecon.generation import GenerationOptions


def test_settings_survive_plain_data():
    options = GenerationOptions(
        helicity="MIXED", electron_polarisation=-0.8, decays="dilepton", sqrt_s=550
    )
    assert GenerationOptions(**options.to_mapping()) == options
    assert options.helicity is Helicity.MIXED


def test_branching_fractions():
    # evaluated independently: (e, mu)+jets 29.3 %, tau+jets 14.6 %, hadronic 45.4 %,
    # dilepton 10.6 % with W branching fractions of the Review of Particle Physics
    lepton_jets = GenerationOptions()
    tau = GenerationOptions(lepton_flavours=("tau",))
    hadronic = GenerationOptions(decays="all-hadronic")
    both = GenerationOptions(decays="dilepton", lepton_flavours=("e", "mu", "tau"))
    everything = GenerationOptions(decays="all", lepton_flavours=("e", "mu", "tau"))
    assert lepton_jets.branching_fraction == pytest.approx(0.293, abs=5e-4)
    assert tau.branching_fraction == pytest.approx(0.146, abs=5e-4)
    assert hadronic.branching_fraction == pytest.approx(0.454, abs=5e-4)
    assert both.branching_fraction == pytest.approx(0.106, abs=5e-4)
    assert everything.branching_fraction == pytest.approx(1.0, abs=1e-3)


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"electron_polarisation": 0.8}, "belong to helicity MIXED"),
        (
            {
                "helicity": "MIXED",
                "electron_polarisation": 1,
                "positron_polarisation": 1,
            },
            "beams of equal helicity make no top pairs",
        ),
        ({"lepton_flavours": ()}, "at least one is required"),
        ({"lepton_flavours": ("e", "e")}, "each at most once"),
        ({"sqrt_s": 360, "inputs": {"top_mass": 190}}, "above twice the top mass"),
        (
            {"sqrt_s": 380, "inputs": {"top_mass": 82, "b_mass": 4}},
            "above the masses of W and b",
        ),
        ({"minimum_sqrt_s_prime": 600}, "must be below sqrt_s"),
        ({"decays": "semi"}, "decays: must be one of"),
        ({"sqrt_s": 100}, "sqrt_s: must be >= 350 GeV; got 100"),
        ({"helicity": "LL"}, "helicity: must be one of"),
    ],
)
def test_impossible_settings_are_refused(settings, message):
    with pytest.raises(ValueError, match=message):
        GenerationOptions(**settings)
