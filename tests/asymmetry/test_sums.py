from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.toys import selected, toy_table
from toprecon.asymmetry import accumulate
from toprecon.asymmetry.state import (
    BACKGROUND,
    N_COMPONENTS,
    OUTSIDE,
    REJECTED,
)
from toprecon.asymmetry.sums import signs
from toprecon.events import EventTable, PairingClass

EVERYTHING = {
    "loss": 0.2,
    "resolution": 0.1,
    "wrong_b": 0.2,
    "wrong_w": 0.1,
    "unmatched": 0.2,
    "charge": 0.1,
    "outside": 0.05,
    "background": 0.1,
    "weights": lambda rng, n: rng.exponential(1.0, n),
}


def sums_of(table):
    return accumulate(table, selected(table), table["weight"])


def brute_state(table, mask):
    """The state by a loop over events, from its definition."""
    first = np.zeros((10, N_COMPONENTS))
    second = np.zeros((10, N_COMPONENTS, N_COMPONENTS))
    counts = np.zeros(10, int)

    def sign(x):
        return 0.0 if np.isnan(x) else (1.0 if x >= 0 else -1.0)

    process = table.is_signal_process
    for i in range(len(table)):
        t = sign(table["cos_theta_true"][i])
        if mask[i]:
            r = sign(table["cos_theta_reco"][i])
            h = sign(table["cos_theta_chosen"][i]) or r
            c = sign(table["cos_theta_closest"][i])
            if table["pairing_class"][i] == PairingClass.CORRECT:
                c = h
            if table["is_signal"][i]:
                row = int(table["pairing_class"][i])
            else:
                row = OUTSIDE if process[i] else BACKGROUND
        elif table["is_signal"][i]:
            r = h = c = 0.0
            row = REJECTED
        else:
            continue
        u = np.array([1.0, t, c, h, r, t * r, t * h])
        w = table["weight"][i]
        first[row] += w * u
        second[row] += w**2 * np.outer(u, u)
        counts[row] += 1
    return first, second, counts


def test_the_state_agrees_with_a_loop_over_events():
    table = toy_table(500, seed=4, **EVERYTHING)
    sums = sums_of(table)
    first, second, counts = brute_state(table, selected(table))
    assert sums.first == pytest.approx(first, abs=1e-11)
    assert sums.second == pytest.approx(second, abs=1e-10)
    assert sums.counts.tolist() == counts.tolist()


@given(st.integers(0, 300), st.integers(0, 300))
def test_chunks_add_up_to_the_whole(a, b):
    table = toy_table(300, seed=6, **EVERYTHING)
    low, high = sorted((a, b))
    pieces = [slice(0, low), slice(low, high), slice(high, None)]
    parts = [sums_of(table.take(piece)) for piece in pieces]
    total, whole = parts[0] + parts[1] + parts[2], sums_of(table)
    assert total.first == pytest.approx(whole.first, abs=1e-11)
    assert total.second == pytest.approx(whole.second, abs=1e-11)
    assert np.array_equal(total.counts, whole.counts)
    for name, values in whole.spectra.sums.items():
        assert total.spectra.sums[name] == pytest.approx(values, abs=1e-11)
        assert total.spectra.variances[name] == pytest.approx(
            whole.spectra.variances[name], abs=1e-11
        )
    assert total.spectra.flips == pytest.approx(whole.spectra.flips, abs=1e-11)


@given(st.floats(1e-3, 1e3))
def test_scaled_sums_are_those_of_scaled_weights(factor):
    table = toy_table(300, seed=7, **EVERYTHING)
    scaled = sums_of(table).scaled(factor)
    direct = accumulate(table, selected(table), factor * table["weight"])
    assert scaled.first == pytest.approx(direct.first, rel=1e-12)
    assert scaled.second == pytest.approx(direct.second, rel=1e-12)
    assert scaled.spectra.flips_variances == pytest.approx(
        direct.spectra.flips_variances, rel=1e-12
    )
    a, b = scaled.result(), sums_of(table).result()
    assert a.reconstructed.value == pytest.approx(b.reconstructed.value, rel=1e-12)
    assert a.reconstructed.error == pytest.approx(b.reconstructed.error, rel=1e-12)
    # the expected error is that of data of as many events as the sum
    assert a.expected_error == pytest.approx(b.expected_error / factor**0.5, rel=1e-9)


def test_missing_angles_have_no_sign_and_never_become_zero_degrees():
    assert signs(np.array([0.0, -0.0, 1e-300, -1e-300, np.nan])).tolist() == [
        1,
        1,
        1,
        -1,
        0,
    ]
    table = toy_table(400, seed=8)
    columns = dict(table.columns)
    missing = np.arange(400) < 100
    columns["cos_theta_true"] = np.where(missing, np.nan, columns["cos_theta_true"])
    columns["is_signal"] = ~missing
    table = EventTable(columns, table.samples, table.stages)
    result = sums_of(table).result()
    assert result.generated.value == pytest.approx(
        np.mean(signs(columns["cos_theta_true"][100:]))
    )
    assert result.spectra.sums["generated"].sum() == pytest.approx(300)
    assert result.spectra.sums["outside"].sum() == pytest.approx(100)


def test_an_undecided_true_charge_makes_no_charge_error():
    table = toy_table(400, seed=8, charge=0.3)
    columns = dict(table.columns)
    columns["cos_theta_chosen"] = np.full(400, np.nan)
    table = EventTable(columns, table.samples, table.stages)
    assert sums_of(table).result().budget["charge"].shift.value == 0


def test_unselected_rows_outside_the_truth_phase_space_do_not_enter():
    table = toy_table(400, seed=8, outside=0.3, background=0.3)
    sums = accumulate(table, np.zeros(400, bool), table["weight"])
    assert sums.counts.sum() == sums.counts[REJECTED] == table["is_signal"].sum()


def test_an_empty_table_gives_zero_sums_and_missing_results():
    sums = sums_of(toy_table(5).take(slice(0, 0)))
    assert not sums.first.any()
    result = sums.result()
    for name in ("generated", "reconstructed", "shift", "efficiency", "closest"):
        assert np.isnan(getattr(result, name).value), name
    assert np.isnan(result.expected_error)
    assert result.by_class == {}
    assert all(np.isnan(f.value) for f in result.flip_fractions)
