from __future__ import annotations

import pytest

from toprecon.errors import OptionError
from toprecon.generation import GenerationOptions, generate
from toprecon.study import (
    StudyPlan,
    VariationOptions,
    reconstruct,
    run_study,
    variation_shifts,
    vary,
)


@pytest.fixture(scope="module")
def events():
    return generate(3000, GenerationOptions(helicity="LR"), seed=4)


def test_shifts_are_those_of_two_studies_with_smaller_errors(events):
    plan = StudyPlan().with_cut("pairing.chi2", high=20)
    heavier = plan.with_settings({"pairing.top_mass": 174.5})
    louder = VariationOptions(jet_energy_scale=1.03)
    polarised = plan.with_settings({"beams.electron_polarisation": 0.5})
    found = variation_shifts(
        events,
        plan,
        {"mass": heavier, "energy": louder, "nothing": plan, "beams": polarised},
    )
    nominal = run_study(reconstruct(events, plan), plan).asymmetry
    others = {
        "mass": run_study(events, heavier).asymmetry,
        "energy": run_study(vary(events, louder), plan).asymmetry,
    }
    for name, other in others.items():
        d = found[name]["reconstructed"]
        assert d.first.value == pytest.approx(nominal.reconstructed.value, abs=1e-12)
        assert d.second.value == pytest.approx(other.reconstructed.value, abs=1e-12)
        # most events are reconstructed alike: the paired error is much smaller
        assert 0 < d.difference.error < 0.7 * d.first.error
        assert found[name]["generated"].difference.value == 0
    assert found["nothing"]["reconstructed"].difference.value == 0
    # without cross sections the mix of beams cannot matter
    assert found["beams"]["reconstructed"].difference.value == 0


def test_something_else_is_no_variation(events):
    with pytest.raises(OptionError, match="'x' must be VariationOptions or a StudyPl"):
        variation_shifts(events, StudyPlan(), {"x": 1.01})
