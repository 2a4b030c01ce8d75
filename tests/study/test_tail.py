"""The unmatched share from the tail: toys of a known share, and events with truth."""

from __future__ import annotations

import dataclasses
import json
import math
from pathlib import Path

import numpy as np
import pytest

from tests.samples import SAMPLES
from tests.toys import toy_table
from toprecon.errors import OptionError, StudyError
from toprecon.events import PairingClass
from toprecon.study import (
    StudyPlan,
    open_events,
    reconstruct_source,
    unmatched_from_tail,
)

LAYOUT = Path(__file__).parents[1] / "io" / "layouts" / "showered.toml"
PLAN = StudyPlan().with_settings(
    {
        "beams.luminosity": 500,
        "beams.electron_polarisation": -0.8,
        "beams.positron_polarisation": 0.3,
    }
)
SHARE, TOYS = 0.3, 300


@pytest.fixture(scope="module")
def table():
    """All samples of the lower energy, backgrounds included."""
    return reconstruct_source(open_events(SAMPLES / "catalogue.toml"), PLAN)


def without_truth(table):
    """The table as data would give it."""
    columns = dict(table.columns)
    columns["is_signal"] = np.zeros(len(table), dtype=bool)
    for name in columns:
        if name.startswith(("cos_theta_true", "cos_theta_ch", "cos_theta_cl")):
            columns[name] = np.full(len(table), np.nan)
    return type(table)(columns, table.samples, table.stages, table.provenance)


def uneven(rng, n):
    return rng.choice([0.5, 2.0], n)


def toy_fits(*, data_weights=None, as_data=False, **settings):
    """Fits to independent toys with a true share of 0.3."""
    for k in range(TOYS):
        simulated = toy_table(
            3000, seed=1000 + k, first_id=1 + 3000 * k, unmatched=SHARE, **settings
        )
        data = None
        if as_data:
            settings_of_data = {**settings, "weights": data_weights}
            data = toy_table(1500, seed=50_000 + k, unmatched=SHARE, **settings_of_data)
        yield unmatched_from_tail(
            simulated, StudyPlan(), data=data, observable="toy.quality"
        )


@pytest.mark.parametrize(
    ("as_data", "settings"),
    [
        (False, {}),
        (False, {"weights": uneven}),
        (False, {"background": 0.15, "outside": 0.1}),
        (True, {"weights": uneven, "background": 0.15}),
    ],
    ids=["plain", "weighted", "background", "counts against weights"],
)
def test_errors_cover_the_known_share(as_data, settings):
    """300 toys, fit and tail alone, share and pull: within 4 standard deviations.

    Twelve comparisons of 1 in 16 000 in all: each of the four fails 1 in 1300. The width
    of a normal pull has an error of 1/sqrt(2 n).
    """
    found = list(toy_fits(as_data=as_data, **settings))
    binomial = math.sqrt(0.683 * 0.317 / TOYS)
    for one in ("unmatched", "counted"):
        off = np.array(
            [(getattr(f, one).value - SHARE) / getattr(f, one).error for f in found]
        )
        assert abs(np.mean(np.abs(off) < 1) - 0.683) < 4 * binomial
    pulls = np.array([f.pull for f in found])
    assert abs(pulls.mean()) < 4 / math.sqrt(TOYS)
    assert abs(pulls.std() - 1) < 4 / math.sqrt(2 * TOYS)
    # what the whole shape says is never worse than what two of its bins say
    assert np.mean([f.unmatched.error for f in found]) < np.mean(
        [f.counted.error for f in found]
    )


def test_few_heavy_background_events_are_covered():
    """300 toys with about 7 events of weight 30 per half (fails 1 in 5000).

    The errors hold what an empty bin may have had: share and chi-square within 4
    standard deviations; for a chi-square of so few counts a fifth is allowed as well.
    """
    off, chi2 = [], []
    for k in range(TOYS):
        toy = toy_table(
            3000, seed=90_000 + k, first_id=1 + 3000 * k, unmatched=SHARE,
            background=0.005,
        )  # fmt: skip
        weight = np.where(toy["sample"] == 1, 30.0, 1.0)
        toy = dataclasses.replace(toy, columns={**toy.columns, "weight": weight})
        found = unmatched_from_tail(toy, StudyPlan(), observable="toy.quality")
        off.append((found.unmatched.value - SHARE) / found.unmatched.error)
        chi2.append(found.chi2 / found.degrees)
    inside = np.mean(np.abs(off) < 1)
    assert abs(inside - 0.683) < 4 * math.sqrt(0.683 * 0.317 / TOYS)
    assert abs(np.std(off) - 1) < 4 / math.sqrt(2 * TOYS)
    assert np.mean(chi2) == pytest.approx(1, abs=0.2)


def test_the_share_true_of_the_events_fitted_explains_some_of_the_error():
    """With truth of these events the spread is less than the error (300 toys).

    A pull with the error of the fit would be 10 % too narrow; that this does not show
    has a probability below 1 in 100.
    """
    found = list(toy_fits())
    naive = [(f.unmatched.value - f.true.value) / f.unmatched.error for f in found]
    assert np.std(naive) < np.std([f.pull for f in found])
    assert np.std(naive) < 0.95


def test_the_error_in_data_is_that_of_templates_without_errors(table):
    found = unmatched_from_tail(table, PLAN, beams="LR")
    again = unmatched_from_tail(
        table, PLAN.with_settings({"beams.luminosity": 2000}), beams="LR"
    )
    assert again.unmatched.value == pytest.approx(found.unmatched.value, rel=1e-9)
    assert again.unmatched.error == pytest.approx(found.unmatched.error, rel=1e-6)
    assert again.expected_error == pytest.approx(found.expected_error / 2, rel=1e-6)
    assert f"in data +- {found.expected_error:.4f}" in str(found)
    nothing = unmatched_from_tail(table, PLAN.with_settings({"beams.luminosity": 0}))
    assert math.isnan(nothing.expected_error)
    assert not nothing.is_expected
    assert "the plan states no luminosity" in str(nothing)


def test_data_without_truth_are_fitted_and_the_check_is_missing(table):
    data = without_truth(table)
    found = unmatched_from_tail(table, PLAN, data=data, beams="RL")
    known = unmatched_from_tail(table, PLAN, data=table, beams="RL")
    assert found.unmatched == known.unmatched
    assert math.isnan(found.pull)
    assert not math.isnan(known.pull)
    assert "no truth to check it with" in str(found)
    assert json.loads(json.dumps(found.to_mapping(), allow_nan=False))["pull"] is None
    with pytest.raises(StudyError, match="matched signal events with truth"):
        unmatched_from_tail(data, PLAN)


def test_nothing_to_be_fitted_is_said(table):
    none = type(table)(
        {n: c[:0] for n, c in table.columns.items()}, table.samples, table.stages
    )
    with pytest.raises(StudyError, match=r"pairing.chi2 are required.*got 0"):
        unmatched_from_tail(table, PLAN, data=none)


def test_where_the_tail_begins_can_be_stated():
    table, plan = toy_table(3000, unmatched=SHARE), StudyPlan()
    usual = unmatched_from_tail(table, plan, observable="toy.quality")
    quality, in_b = table["toy.quality"], ~table.in_half_a
    matched = table["pairing_class"] != PairingClass.UNMATCHED
    assert np.mean(quality[matched & ~in_b] >= usual.place) == pytest.approx(
        0.1, abs=2 / 1000
    )
    found = unmatched_from_tail(table, plan, observable="toy.quality", place=5)
    assert found.place == 5
    assert found.unmatched == usual.unmatched
    n = int(in_b.sum())
    share = np.mean(quality[in_b] >= 5)
    assert found.beyond.value == pytest.approx(share, abs=1e-12)
    assert found.beyond.error == pytest.approx(math.sqrt(share * (1 - share) / n))
    # two equations for two shares
    beyond = [np.mean(quality[~in_b & kind] >= 5) for kind in (matched, ~matched)]
    assert found.counted.value == pytest.approx(
        (share - beyond[0]) / (beyond[1] - beyond[0]), rel=1e-9
    )
    assert "score of at least 5" in str(found)
    for place in (-1.0, 1e9):
        with pytest.raises(OptionError, match=r"place: the tail must begin above"):
            unmatched_from_tail(table, plan, observable="toy.quality", place=place)


def test_the_cut_on_the_score_is_not_applied_and_that_is_said(table):
    found = unmatched_from_tail(table, PLAN, beams="LR")
    cut = unmatched_from_tail(table, PLAN.with_cut("pairing.chi2", high=15), beams="LR")
    assert cut.unmatched == found.unmatched
    assert "before the cut on pairing.chi2" in str(cut)
    assert "before the cut" not in str(found)


def test_an_unsure_background_makes_the_share_less_sure(table):
    fits = [unmatched_from_tail(table, PLAN, background_error=e) for e in (0.0, 1.0)]
    assert fits[1].unmatched.error > fits[0].unmatched.error > 0
    assert fits[1].expected_error > fits[0].expected_error > 0


@pytest.mark.parametrize("beams", ["plan", "LR", "RL"])
def test_the_share_agrees_with_truth_under_backgrounds(table, beams):
    """Within 3 errors of the difference (fails 1 in 370 where errors are right)."""
    found = unmatched_from_tail(table, PLAN, beams=beams)
    assert abs(found.pull) < 3
    parts = np.sum(list(found.parts.values()), axis=0)
    assert parts == pytest.approx(found.expected)


@pytest.mark.parametrize("helicity", ["LR", "RL"])
def test_the_share_agrees_with_truth_on_showered_events(event_data, helicity):
    """Within 3 errors, on half B, templates from half A (fails 1 in 370)."""
    path = event_data / "showered" / f"lepjets_500_{helicity}.root"
    plan = StudyPlan()
    tail = unmatched_from_tail(
        reconstruct_source(open_events(path, layout=LAYOUT), plan), plan
    )
    assert abs(tail.pull) < 3
    assert tail.unmatched.error < 0.03
    assert tail.true.value == pytest.approx(0.28, abs=0.03)
    assert tail.chi2 < tail.degrees + 4 * math.sqrt(2 * tail.degrees)
    difference = tail.counted.value - tail.true.value
    assert abs(difference) < 3 * math.hypot(tail.counted.error, tail.true.error)
    # one tenth of the matched and a larger part of the unmatched
    assert 0.1 < tail.beyond.value < 0.3


def test_bins_are_fewer_where_few_weights_dominate(table):
    mixed = unmatched_from_tail(table, PLAN)
    plain = unmatched_from_tail(table, PLAN, beams="RL")
    assert len(mixed.binning) < len(plain.binning)
