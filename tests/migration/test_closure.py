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


@pytest.mark.parametrize("method", ["tikhonov", "bayes"])
def test_regularised_methods_say_how_strong_they_were(method):
    table = toy_table(20_000, seed=5, **CAUSES)
    options = UnfoldingOptions(method=method)
    found = check_closure(*halves(table, MigrationOptions()), options)
    assert found.unfolded.strength > 0


def test_impossible_requests_are_explained():
    table = toy_table(2000, seed=5)
    a, b = halves(table)
    assert a.generated.sum() + b.generated.sum() == 2000
    with pytest.raises(StudyError, match="equal bins are required in both halves"):
        check_closure(a, halves(table, MigrationOptions())[1])
    columns = dict(table.columns)
    columns["stage"] = np.ones(2000, np.uint8)
    nothing = EventTable(columns, table.samples, table.stages)
    with pytest.raises(StudyError, match="selected events in every generated bin"):
        check_closure(*halves(nothing))


def test_what_is_left_without_half_a_is_half_b():
    table = toy_table(3000, seed=5, weights=exponential, **CAUSES)
    a, b = halves(table)
    whole = accumulate(table, selected(table), table["weight"], FOUR)
    left = whole.without(a)
    for name, array in b.arrays.items():
        assert left.arrays[name] == pytest.approx(array, rel=1e-9), name
        assert np.array_equal(left.arrays[name] == 0, array == 0), name
    assert np.array_equal(table.in_half_a, in_half_a(table["id"]))
