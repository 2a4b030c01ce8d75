from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.toys import selected, toy_table
from toprecon.asymmetry import (
    Keep,
    ScanAxis,
    ScanOptions,
    ScanResult,
    accumulate,
    accumulate_scan,
)
from toprecon.errors import OptionError, StudyError
from toprecon.events import EventTable
from toprecon.resampling import in_half_a
from toprecon.statistics import asymmetry_from_counts

CAUSES = {
    "loss": 0.2,
    "resolution": 0.1,
    "wrong_b": 0.3,
    "unmatched": 0.2,
    "charge": 0.05,
    "outside": 0.05,
    "background": 0.1,
}
QUALITY = ScanAxis(observable="toy.quality", points=(0.5, 1.0, 2.0, 4.0, 8.0, 100.0))
NOISE = ScanAxis(observable="toy.noise", points=(0.0, 0.25, 0.5, 0.75), keep=Keep.ABOVE)


def exponential(rng, n):
    return rng.exponential(1.0, n)


def sums_of(table, *axes):
    return accumulate_scan(table, selected(table), table["weight"], axes)


@pytest.mark.parametrize("weights", [None, exponential])
def test_every_point_equals_a_study_with_that_cut(weights):
    table = toy_table(4000, seed=31, weights=weights, **CAUSES)
    scan = ScanResult(sums_of(table, QUALITY, NOISE))
    values = scan.everything
    quality, noise = (
        table[name].astype(np.float64) for name in ("toy.quality", "toy.noise")
    )
    for i, high in enumerate(QUALITY.points):
        for j, low in enumerate(NOISE.points):
            mask = selected(table) & (quality < high) & (noise >= low)
            r = accumulate(table, mask, table["weight"]).result()
            at = (i, j)
            assert values.rows[at] == mask.sum()
            pairs = [
                (values.efficiency[at], r.efficiency.value),
                (values.selected_sum[at], r.selected_sum),
                (values.signal_sum[at], r.signal_sum),
                (values.generated_selected[at], r.generated_selected.value),
                (values.reconstructed[at], r.reconstructed.value),
                (values.shift[at], r.shift.value),
                (values.shift_error[at], r.shift.error),
                (values.total_shift[at], r.total_shift.value),
                (values.total_shift_error[at], r.total_shift.error),
                (values.forward_to_backward[at], r.flips.forward_to_backward.value),
                (values.backward_to_forward[at], r.flips.backward_to_forward.value),
                (values.slope[at], r.flips.slope.value),
                (values.offset[at], r.flips.offset.value),
                (values.expected_error[at], r.expected_error),
                (
                    values.effective_events[at],
                    r.signal_sum * r.flips.slope.value**2,
                ),
            ]
            for found, expected in pairs:
                assert found == pytest.approx(expected, rel=1e-9, abs=1e-12)


def test_one_axis_is_a_grid_of_one_column():
    table = toy_table(3000, seed=1, **CAUSES)
    scan = ScanResult(sums_of(table, QUALITY))
    assert scan.everything.bias.shape == (6, 1)
    both = ScanResult(sums_of(table, QUALITY, NOISE))
    assert np.array_equal(scan.everything.rows[:, 0], both.everything.rows[:, 0])
    assert scan.best.index[1] == 0
    assert len(scan.best.cuts) == 1


@given(st.integers(0, 500), st.floats(1e-2, 1e2))
def test_chunks_add_up_and_weights_scale(border, factor):
    table = toy_table(500, seed=3, weights=exponential, **CAUSES)
    whole = sums_of(table, QUALITY, NOISE)
    parts = [
        sums_of(table.take(rows), QUALITY, NOISE)
        for rows in (slice(0, border), slice(border, None))
    ]
    total = parts[0] + parts[1]
    scaled = whole.scaled(factor)
    direct = accumulate_scan(
        table, selected(table), factor * table["weight"], (QUALITY, NOISE)
    )
    for name in ("sums", "squares", "rows", "signal_sums", "signal_squares"):
        assert getattr(total, name) == pytest.approx(getattr(whole, name), abs=1e-11)
        assert getattr(scaled, name) == pytest.approx(getattr(direct, name), rel=1e-12)


def test_the_halves_are_those_of_the_identities():
    table = toy_table(4000, seed=31, **CAUSES)
    scan = ScanResult(sums_of(table, QUALITY))
    half = in_half_a(table["id"])
    for values, rows in ((scan.half_a, half), (scan.half_b, ~half)):
        part = table.take(rows)
        mask = selected(part) & (part["toy.quality"] < 4.0)
        r = accumulate(part, mask, part["weight"]).result()
        assert values.bias[3, 0] == pytest.approx(r.total_shift.value, abs=1e-12)
        assert values.bias_error[3, 0] == pytest.approx(r.total_shift.error, rel=1e-9)
        whole = table["is_signal"].sum() / part["is_signal"].sum()
        assert values.selected_sum[3, 0] == pytest.approx(r.selected_sum * whole)
    at = scan.point(3)
    part = table.take(~half)
    mask = selected(part) & (part["toy.quality"] < 4.0)
    r = accumulate(part, mask, part["weight"]).result()
    assert at.efficiency.value == pytest.approx(r.efficiency.value)
    assert at.efficiency.error == pytest.approx(r.efficiency.error)
    assert at.bias.value == pytest.approx(r.total_shift.value)


def test_the_front_holds_exactly_the_points_that_nothing_beats():
    table = toy_table(5000, seed=5, **CAUSES)
    scan = ScanResult(sums_of(table, QUALITY, NOISE), ScanOptions(fewest_rows=1))
    for cost in ("bias", "total_error"):
        efficiency = scan.everything.efficiency.ravel()
        price = abs(getattr(scan.everything, cost)).ravel()
        considered = scan.is_considered.ravel()
        for point in range(len(price)):
            better = (
                considered
                & (efficiency >= efficiency[point])
                & (price <= price[point])
                & ((efficiency > efficiency[point]) | (price < price[point]))
            )
            expected = considered[point] and not better.any()
            assert scan.front(cost).ravel()[point] == expected
    assert np.array_equal(scan.is_on_front, scan.front("bias"))


def test_the_best_point_has_the_smallest_total_error_on_half_a():
    table = toy_table(20_000, seed=6, wrong_b=0.3, flip_backward=0.1)
    scan = ScanResult(sums_of(table, QUALITY, NOISE))
    best = scan.best
    a = scan.half_a
    assert a.total_error[best.index] == np.nanmin(a.total_error[scan.is_considered])
    assert best.bias.value == scan.half_b.bias[best.index]
    assert best.bias_when_chosen.value == a.bias[best.index]
    assert best.cuts[0] == ("toy.quality", None, QUALITY.points[best.index[0]])
    assert best.cuts[1] == ("toy.noise", NOISE.points[best.index[1]], None)
    # wrong pairings have a larger toy.quality: a cut on it helps
    assert QUALITY.points[best.index[0]] < 100
    assert "toy.quality <" in str(best)
    assert "toy.noise >= " in str(best)
    assert "bias" in str(best)


def test_options_limit_the_choice():
    table = toy_table(20_000, seed=6, wrong_b=0.3, flip_backward=0.1)
    sums = sums_of(table, QUALITY)
    free, bound = (
        ScanResult(sums, ScanOptions(smallest_efficiency=e)) for e in (0.0, 0.95)
    )
    assert (
        free.best.efficiency.value
        < 0.95
        <= bound.everything.efficiency[bound.best.index]
    )
    # nothing is left of the bias: only statistics count, so the loosest cut wins
    corrected = ScanResult(sums, ScanOptions(residual=0.0)).best
    assert corrected.cuts[0][2] == 100.0
    assert corrected.total_error == pytest.approx(corrected.expected_error)
    with pytest.raises(StudyError, match=r"a point with enough events is required"):
        _ = ScanResult(sums, ScanOptions(fewest_rows=10**6)).best


def test_the_bias_of_the_selected_events_leaves_the_acceptance_out():
    table = toy_table(20_000, seed=6, loss=0.5)
    sums = sums_of(table, QUALITY)
    total, shift = (
        ScanResult(sums, ScanOptions(bias=kind)) for kind in ("total", "shift")
    )
    assert abs(total.everything.bias[-1, 0]) > 0.1
    assert shift.everything.bias[-1, 0] == 0


def test_squared_bias_is_unbiased_and_the_quoted_bias_is_covered():
    """Without the correction, noise alone would look like a bias."""
    truth = ScanResult(
        sums_of(toy_table(1_000_000, seed=1234, wrong_b=0.2), QUALITY)
    ).everything.bias[:, 0]
    squares, pulls = [], []
    n_toys = 300
    for seed in range(n_toys):
        table = toy_table(1000, seed=seed, wrong_b=0.2, first_id=1 + 1000 * seed)
        scan = ScanResult(sums_of(table, QUALITY), ScanOptions(fewest_rows=10))
        squares.append(scan.everything.squared_bias[3, 0])
        best = scan.best
        pulls.append((best.bias.value - truth[best.index[0]]) / best.bias.error)
    error = np.std(squares) / math.sqrt(n_toys)
    # 4 sigma
    assert abs(np.mean(squares) - truth[3] ** 2) < 4 * error
    inside = np.mean(np.abs(pulls) < 1)
    # 4 binomial errors
    assert abs(inside - 0.683) < 4 * math.sqrt(0.683 * 0.317 / n_toys)


def test_undefined_observables_pass_no_cut():
    table = toy_table(1000, seed=2)
    columns = dict(table.columns)
    quality = columns["toy.quality"].copy()
    quality[:300] = np.nan
    columns["toy.quality"] = quality
    table = EventTable(columns, table.samples, table.stages)
    scan = ScanResult(sums_of(table, QUALITY))
    assert scan.everything.rows[-1, 0] == np.sum(quality < 100)
    above = ScanAxis(observable="toy.quality", points=(-1.0,), keep="above")
    assert ScanResult(sums_of(table, above)).everything.rows[0, 0] == 700


def test_values_at_a_cut_are_dropped_below_and_kept_above():
    values = [0.0, 1.0, 2.0, np.nan, np.inf, -np.inf]
    below = ScanAxis(observable="x.y", points=(1.0, 2.0))
    above = ScanAxis(observable="x.y", points=(1.0, 2.0), keep="above")
    assert below.cells(values).tolist() == [0, 1, -1, -1, -1, 0]
    assert above.cells(values).tolist() == [-1, 0, 1, -1, 1, -1]
    assert below.cut(1) == ("x.y", None, 2.0)
    assert above.cut(0) == ("x.y", 1.0, None)


@pytest.mark.parametrize("keep", [Keep.BELOW, Keep.ABOVE])
def test_spread_points_keep_even_shares(keep, rng):
    values = rng.exponential(1.0, 1000)
    values[:10] = np.nan
    axis = ScanAxis.spread("toy.quality", values, n=20, keep=keep)
    finite = values[np.isfinite(values)]
    kept = [
        np.mean(finite < p) if keep is Keep.BELOW else np.mean(finite >= p)
        for p in axis.points
    ]
    expected = np.arange(1, 21) / 20
    assert sorted(kept) == pytest.approx(expected, abs=0.002)
    assert max(kept) == 1.0
    same = ScanAxis.spread("toy.quality", np.ones(5), keep=keep)
    assert len(same.points) == 1


def test_a_half_without_events_is_missing_and_an_empty_table_has_no_best():
    sums = sums_of(toy_table(5).take(slice(0, 0)), QUALITY)
    scan = ScanResult(sums)
    assert np.isnan(scan.everything.bias).all()
    assert not scan.is_on_front.any()
    with pytest.raises(StudyError, match="none has an efficiency"):
        _ = scan.best


def test_wrong_scans_are_explained():
    table = toy_table(50)
    with pytest.raises(StudyError, match="one or two different observables are requ"):
        sums_of(table)
    with pytest.raises(StudyError, match="one or two different observables are requ"):
        sums_of(table, QUALITY, QUALITY)
    with pytest.raises(StudyError, match="equal axes are required to add them"):
        _ = sums_of(table, QUALITY) + sums_of(table, NOISE)
    with pytest.raises(OptionError, match="points: must be at least one value, stri"):
        ScanAxis(observable="toy.quality", points=(1.0, 1.0))
    with pytest.raises(OptionError, match=r"toy\.quality: at least one finite value"):
        ScanAxis.spread("toy.quality", [np.nan])


def test_expected_error_of_a_point_is_that_of_so_many_events():
    table = toy_table(2000, seed=9)
    scan = ScanResult(sums_of(table, QUALITY))
    at = (2, 0)
    n, a = scan.everything.selected_sum[at], scan.everything.reconstructed[at]
    counted = asymmetry_from_counts(n * (1 + a) / 2, n * (1 - a) / 2)
    assert scan.everything.expected_error[at] == pytest.approx(counted.error)
