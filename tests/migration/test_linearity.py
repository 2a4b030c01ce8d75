from __future__ import annotations

import math

import numpy as np
import pytest

from tests.toys import asymmetry_ratio, selected, toy_table
from toprecon.errors import StudyError
from toprecon.migration import (
    MigrationOptions,
    UnfoldingOptions,
    accumulate_halves,
    check_closure,
    check_linearity,
)

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


def halves(table, options=FOUR):
    return accumulate_halves(table, selected(table), table["weight"], options)


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
    arguments = (table, selected(table), table["weight"])
    with pytest.raises(StudyError, match=r"'x' must have one ratio for each of the 2"):
        check_linearity(*arguments, {"x": np.ones(3)}, FOUR)
    with pytest.raises(StudyError, match="'x' must be finite for every event"):
        check_linearity(*arguments, {"x": np.full(2000, np.nan)}, FOUR)
