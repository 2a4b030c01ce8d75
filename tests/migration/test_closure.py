from __future__ import annotations

import math

import numpy as np
import pytest

from tests.toys import selected, toy_table
from toprecon.errors import NotClosingWarning, StudyError
from toprecon.events import EventTable
from toprecon.migration import (
    MigrationOptions,
    UnfoldingOptions,
    accumulate,
    accumulate_halves,
    check_closure,
    check_linearity,
)
from toprecon.resampling import in_half_a

FOUR = MigrationOptions(edges=(-1, -0.5, 0, 0.5, 1))
CAUSES = {
    "loss": 0.2,
    "resolution": 0.1,
    "wrong_b": 0.2,
    "unmatched": 0.2,
    "outside": 0.05,
    "background": 0.1,
}
# flips and losses do not depend on where in its bin an event is: exactly linear
LINEAR = {**CAUSES, "resolution": 0.0, "outside": 0.0}
METHODS = [
    UnfoldingOptions(),
    UnfoldingOptions(method="tikhonov", strength=5.0),
    UnfoldingOptions(method="bayes", iterations=8),
]


def ids(method):
    return method.method


def halves(table, options=FOUR):
    return accumulate_halves(table, selected(table), table["weight"], options)


def exponential(rng, n):
    return rng.exponential(1.0, n)


def asymmetry_ratio(table, wanted, asymmetry=0.38):
    """Ratio of the angular densities 3/8 (1 + c^2) + A c of the toys."""
    c = np.nan_to_num(table["cos_theta_true"])
    even = 0.375 * (1 + c**2)
    return (even + wanted * c) / (even + asymmetry * c)


def test_the_halves_are_those_of_the_identities_and_add_up():
    table = toy_table(2000, seed=1, weights=exponential, **CAUSES)
    a, b = halves(table)
    rows = in_half_a(table["id"])
    part = table.take(rows)
    direct = accumulate(part, selected(part), part["weight"], FOUR)
    assert a.counts == pytest.approx(direct.counts)
    whole = accumulate(table, selected(table), table["weight"], FOUR)
    assert (a + b).generated == pytest.approx(whole.generated)
    assert (a + b).counts_variances == pytest.approx(whole.counts_variances)


def test_residuals_are_corrected_minus_generated_of_half_b():
    table = toy_table(20_000, seed=1, **CAUSES)
    a, b = halves(table)
    found = check_closure(a, b)
    assert found.residual == pytest.approx(found.unfolded.values - b.generated)
    part = table.take(~in_half_a(table["id"]) & table["is_signal"])
    true = np.where(part["cos_theta_true"] >= 0, 1.0, -1.0).mean()
    assert found.asymmetry_generated.value == pytest.approx(true)
    assert found.asymmetry_residual.value == pytest.approx(
        found.asymmetry_corrected.value - true
    )
    # paired: smaller than what the corrected one has alone
    assert found.asymmetry_residual.error < found.asymmetry_corrected.error
    assert str(found).startswith("closure: A_FB corrected minus generated ")


def test_a_matrix_closes_exactly_with_itself():
    a, _ = halves(toy_table(20_000, seed=1, **CAUSES))
    found = check_closure(a, a)
    assert found.residual == pytest.approx(np.zeros(4), abs=1e-8)


def check_pulls(method, n_toys, weights):
    pulls, of_asymmetry, chances = [], [], []
    for seed in range(n_toys):
        table = toy_table(
            6000, seed=seed, first_id=1 + 6000 * seed, weights=weights, **CAUSES
        )
        found = check_closure(*halves(table), method)
        pulls.append(found.pulls)
        m = found.asymmetry_residual
        of_asymmetry.append(m.value / m.error)
        chances.append(found.probability)
    for values in (*np.array(pulls).T, np.array(of_asymmetry)):
        # 4 sigma each on mean, width and coverage
        assert abs(values.mean()) < 4 / math.sqrt(n_toys)
        assert abs(values.std() - 1) < 4 / math.sqrt(2 * n_toys)
        inside = np.mean(abs(values) < 1)
        assert abs(inside - 0.683) < 4 * math.sqrt(0.683 * 0.317 / n_toys)
    # probabilities are flat: mean 1/2, width 1/sqrt(12)
    assert abs(np.mean(chances) - 0.5) < 4 / math.sqrt(12 * n_toys)


@pytest.mark.slow
@pytest.mark.parametrize("method", METHODS, ids=ids)
def test_residuals_have_their_errors_in_toys(method):
    check_pulls(method, 100, exponential)


@pytest.mark.soak
@pytest.mark.parametrize("method", METHODS, ids=ids)
def test_residuals_have_their_errors_in_many_toys(method):
    check_pulls(method, 500, exponential)


def test_a_wrong_response_does_not_close_and_warns():
    table = toy_table(40_000, seed=2, wrong_b=0.4, flip_forward=0.6, flip_backward=0.1)
    other = toy_table(40_000, seed=3, wrong_b=0.4, flip_forward=0.1, flip_backward=0.6)
    a, b = halves(table)[0], halves(other)[1]
    with pytest.warns(NotClosingWarning, match="does not give back the truth"):
        found = check_closure(a, b)
    assert abs(found.asymmetry_residual.value) > 5 * found.asymmetry_residual.error


def test_an_inversion_is_linear_in_the_asymmetry():
    table = toy_table(200_000, seed=5, **LINEAR)
    wanted = (-0.3, 0.0, 0.2, 0.38, 0.55)
    ratios = {f"{a:g}": asymmetry_ratio(table, a) for a in wanted}
    found = check_linearity(table, selected(table), table["weight"], ratios, FOUR)
    # the truths asked for, within the statistics of 7e4 events (0.004)
    assert found.generated == pytest.approx(wanted, abs=0.02)
    assert abs(found.slope.value - 1) < 4 * found.slope.error < 0.1
    assert abs(found.offset.value) < 4 * found.offset.error
    for name in ratios:
        m = found[name]
        assert abs(m.value) < 4 * m.error
    assert found["0.38"].value == pytest.approx(
        check_closure(*halves(table)).asymmetry_residual.value, abs=1e-12
    )
    assert found["0.38"].error == pytest.approx(
        check_closure(*halves(table)).asymmetry_residual.error, rel=1e-9
    )
    d = found.difference("0.55", "0.38")
    assert d.value == pytest.approx(found["0.55"].value - found["0.38"].value)
    assert d.error < found["0.55"].error


def test_wide_bins_are_not_linear_if_the_resolution_mixes_them():
    """The place within a bin follows the truth, and with it what leaves the bin."""
    table = toy_table(400_000, seed=5, **{**LINEAR, "resolution": 0.1})
    ratios = {f"{a:g}": asymmetry_ratio(table, a) for a in (-0.3, 0.0, 0.38, 0.55)}
    wide, narrow = (
        check_linearity(table, selected(table), table["weight"], ratios, options).slope
        for options in (FOUR, MigrationOptions())
    )
    assert abs(wide.value - 1) > 5 * wide.error
    assert abs(narrow.value - 1) < 0.6 * abs(wide.value - 1)


def test_strong_regularisation_is_not_linear():
    table = toy_table(200_000, seed=5, **CAUSES)
    ratios = {f"{a:g}": asymmetry_ratio(table, a) for a in (-0.5, 0.0, 0.38, 0.6)}
    one_step = UnfoldingOptions(method="bayes", iterations=1)
    found = check_linearity(
        table, selected(table), table["weight"], ratios, FOUR, one_step
    )
    # one iteration stays near the simulation: the slope is far below one
    assert found.slope.value < 1 - 10 * found.slope.error


def test_errors_of_a_linearity_are_the_spread_of_toys():
    slopes, errors, offsets, offset_errors = [], [], [], []
    n_toys = 150
    for seed in range(n_toys):
        table = toy_table(6000, seed=seed, first_id=1 + 6000 * seed, **LINEAR)
        ratios = {f"{a:g}": asymmetry_ratio(table, a) for a in (-0.3, 0.1, 0.5)}
        found = check_linearity(table, selected(table), table["weight"], ratios, FOUR)
        slopes.append(found.slope.value)
        errors.append(found.slope.error)
        offsets.append(found.offset.value)
        offset_errors.append(found.offset.error)
    # a spread of 150 is known to 5.8 %; 4 sigma
    assert np.std(slopes) == pytest.approx(np.mean(errors), rel=0.23)
    assert np.std(offsets) == pytest.approx(np.mean(offset_errors), rel=0.23)
    assert abs(np.mean(slopes) - 1) < 4 * np.std(slopes) / math.sqrt(n_toys)


def test_other_processes_keep_their_weight_and_one_truth_has_no_slope():
    table = toy_table(20_000, seed=5, **CAUSES)
    ratio = np.where(table.is_signal_process, 1.0, np.nan)
    found = check_linearity(
        table, selected(table), table["weight"], {"same": ratio}, FOUR
    )
    same = check_closure(*halves(table)).asymmetry_residual
    assert found["same"].value == pytest.approx(same.value, abs=1e-12)
    assert math.isnan(found.slope.value)


@pytest.mark.parametrize("method", ["tikhonov", "bayes"])
def test_regularised_methods_run_with_an_automatic_strength(method):
    table = toy_table(20_000, seed=5, **CAUSES)
    options = UnfoldingOptions(method=method)
    found = check_closure(*halves(table, MigrationOptions()), options)
    assert found.unfolded.strength > 0
    ratios = {"up": asymmetry_ratio(table, 0.5), "as it is": np.ones(20_000)}
    line = check_linearity(
        table, selected(table), table["weight"], ratios, MigrationOptions(), options
    )
    assert line["as it is"].value == pytest.approx(
        found.asymmetry_residual.value, abs=1e-9
    )


def test_impossible_requests_are_explained():
    table = toy_table(2000, seed=5)
    a, b = halves(table)
    with pytest.raises(StudyError, match="equal bins are required in both halves"):
        check_closure(a, halves(table, MigrationOptions())[1])
    arguments = (table, selected(table), table["weight"])
    with pytest.raises(StudyError, match=r"'x' must have one ratio for each of the 2"):
        check_linearity(*arguments, {"x": np.ones(3)}, FOUR)
    with pytest.raises(StudyError, match="'x' must be finite for every event"):
        check_linearity(*arguments, {"x": np.full(2000, np.nan)}, FOUR)
    columns = dict(table.columns)
    columns["stage"] = np.ones(2000, np.uint8)
    nothing = EventTable(columns, table.samples, table.stages)
    with pytest.raises(StudyError, match="selected events in every generated bin"):
        check_closure(*halves(nothing))
    assert a.generated.sum() + b.generated.sum() == 2000
