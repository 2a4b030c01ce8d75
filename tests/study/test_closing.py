"""Closure and linearity of generated events, for which the truth is known."""

from __future__ import annotations

import numpy as np
import pytest

from toprecon.errors import StudyError
from toprecon.events import PairingClass
from toprecon.generation import GenerationOptions, generate
from toprecon.migration import accumulate_halves, check_closure
from toprecon.study import (
    StudyPlan,
    UnfoldingOptions,
    angle_linearity,
    apply_cuts,
    closure_of,
    coupling_dependence,
    reconstruct,
)
from toprecon.treelevel import FormFactors

N = 60_000


@pytest.fixture(scope="module")
def still_events():
    """No photons, so that the pair rests in the laboratory."""
    return generate(N, GenerationOptions(helicity="LR", radiation=False), seed=11)


@pytest.fixture(scope="module")
def radiating_events():
    return generate(N, GenerationOptions(helicity="LR"), seed=12)


@pytest.mark.parametrize("method", ["inversion", "tikhonov", "bayes"])
def test_a_study_closes_on_its_halves(still_events, method):
    plan = StudyPlan().with_cut("pairing.chi2", high=50)
    table = reconstruct(still_events, plan)
    found = closure_of(table, plan, UnfoldingOptions(method=method), beams="LR")
    m = found.asymmetry_residual
    assert abs(m.value) < 4 * m.error  # 6e-5
    assert found.probability > 1e-4
    halves = accumulate_halves(
        table, apply_cuts(table, plan).selected, table["weight"], plan.migration
    )
    same = check_closure(*halves, UnfoldingOptions(method=method))
    assert same.residual == pytest.approx(found.residual, abs=1e-9)


def test_the_correction_is_linear_without_radiation(still_events):
    found = angle_linearity(still_events, StudyPlan())
    assert found.names[0] == "asymmetry x 0"
    # no asymmetry is left; statistical error 0.006
    assert abs(found.generated[0]) < 0.025
    assert abs(found.slope.value - 1) < 4 * found.slope.error < 0.04
    assert abs(found.offset.value) < 4 * found.offset.error


def test_radiation_makes_the_slope_larger_than_one(radiating_events):
    """An effect of a few per cent, seen at 12 standard deviations in 2e5 events."""
    found = angle_linearity(radiating_events, StudyPlan())
    assert found.slope.value - 1 == pytest.approx(0.041, abs=4 * found.slope.error)
    assert found.slope.value - 1 > 2 * found.slope.error


def test_other_couplings_show_the_model_dependence(still_events):
    found = coupling_dependence(still_events, StudyPlan())
    assert len(found.names) == 7
    assert found.difference("simulated", "simulated").value == 0
    # more axial coupling means more asymmetry
    a = dict(zip(found.names, found.generated, strict=True))
    assert a["f1a_z +20 %"] > a["simulated"] > a["f1a_z -20 %"]
    # the known sensitivity: +0.0031 per 1 %, less what 20 % bend (own calculation)
    assert a["f1a_z +20 %"] - a["simulated"] == pytest.approx(0.055, abs=0.012)
    for name in found.names:
        assert abs(found.difference(name, "simulated").value) < 0.02
    one = coupling_dependence(
        still_events,
        StudyPlan(),
        variations={"same": FormFactors.standard_model()},
    )
    assert one.difference("same", "simulated").value == pytest.approx(0, abs=1e-9)


def test_factors_stop_where_the_distribution_would_be_negative(still_events):
    right = generate(5000, GenerationOptions(helicity="RL"), seed=3)
    found = angle_linearity(right, StudyPlan())
    largest = float(found.names[-1].split()[-1])
    assert 1 < largest < 1.5
    with pytest.raises(StudyError, match="the asymmetry factor 5 makes it negative"):
        angle_linearity(still_events[:5000], StudyPlan(), factors=[5.0])


def test_a_linearity_of_nothing_is_refused(still_events):
    with pytest.raises(StudyError, match="events with truth are required; got none"):
        angle_linearity(still_events[:0], StudyPlan())


def test_the_class_of_an_event_plays_no_part_in_the_correction(still_events):
    plan = StudyPlan()
    table = reconstruct(still_events, plan)
    columns = dict(table.columns)
    columns["pairing_class"] = np.full(len(table), PairingClass.UNMATCHED, np.uint8)
    other = type(table)(columns, table.samples, table.stages, table.provenance)
    a, b = (closure_of(t, plan, beams="LR").residual for t in (table, other))
    assert np.array_equal(a, b)
