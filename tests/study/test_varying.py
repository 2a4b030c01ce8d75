from __future__ import annotations

import json

import pytest

from toprecon.errors import InputError, OptionError
from toprecon.generation import GenerationOptions, generate
from toprecon.study import (
    StudyPlan,
    VariationOptions,
    compare_plans,
    open_events,
    reconstruct,
    run_study,
    usual_variations,
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


def test_usual_variations_of_files_in_a_table(study_files, study_plan):
    steps = []
    plan = study_plan
    found = variation_shifts(study_files, plan, progress=lambda *s: steps.append(s))
    wanted = usual_variations(plan)
    assert list(found) == list(wanted)
    # two files; other beams need no reconstruction of their own
    assert steps[-1] == (2 * len(wanted), 2 * len(wanted))
    text = str(found)
    for name, comparison in found.items():
        assert name in text
        shift = comparison["shift"].difference
        assert (str(shift) if shift.error else f"{0:>22}") in text
    data = json.loads(json.dumps(found.to_mapping(), allow_nan=False))
    assert data["b tags lost 2 %"]["efficiency"]["value"] < 0
    assert data["jet energy +1 %"]["efficiency"]["error"] >= 0
    events = open_events(study_files).read()
    louder = {"louder": VariationOptions(jet_energy_scale=1.01)}
    again = variation_shifts(events, plan, louder)["louder"]["shift"].difference
    assert again.value == pytest.approx(
        found["jet energy +1 %"]["shift"].difference.value, abs=1e-12
    )


def test_beams_are_varied_where_a_luminosity_is_stated(study_plan):
    assert "|P(e-)| 0.01 smaller" in usual_variations(study_plan)
    plan = study_plan.with_settings({"beams.luminosity": 0})
    assert "|P(e-)| 0.01 smaller" not in usual_variations(plan)
    assert "|P(e-)| 0.01 smaller" not in usual_variations(study_plan, "LR")


def test_what_cannot_change_is_zero_in_the_table(events):
    plan = StudyPlan()
    text = str(variation_shifts(events, plan, {"nothing": plan}))
    assert text.splitlines()[1].split() == ["nothing", "0", "0", "0", "0"]


def test_a_plan_with_other_cuts_keeps_the_observables_it_needs(events):
    plan = StudyPlan().with_cut("pairing.chi2", high=20)
    cuts = plan.with_cut("pairing.share", low=0.9)
    found = variation_shifts(events, plan, {"cut": cuts})["cut"]
    expected = compare_plans(events, plan, cuts)
    assert found["efficiency"] == expected["efficiency"]
    assert found["shift"] == expected["shift"]


def test_a_table_cannot_be_varied(events, tmp_path):
    table = reconstruct(events, StudyPlan())
    path = table.save(tmp_path / "table.parquet")
    for source in (table, path, [str(path)]):
        with pytest.raises(InputError, match="events are required for variations, wh"):
            variation_shifts(source, StudyPlan())
