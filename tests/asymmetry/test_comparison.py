from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest

from tests.toys import selected, toy_table
from toprecon.asymmetry import accumulate
from toprecon.asymmetry.comparison import QUANTITIES, Rows, compare
from toprecon.errors import StudyError
from toprecon.events import EventTable, PairingClass
from toprecon.resampling import replica_counts

CAUSES = {
    "loss": 0.2,
    "resolution": 0.1,
    "wrong_b": 0.2,
    "unmatched": 0.2,
    "outside": 0.05,
    "background": 0.1,
    "weights": lambda rng, n: rng.exponential(1.0, n),
}


def rows_of(table, mask=None, weight=None):
    mask = selected(table) if mask is None else mask
    return Rows(table, mask, table["weight"] if weight is None else weight)


def other_of(table, share=0.2, seed=5):
    """The same events reconstructed otherwise: some angles have another sign."""
    rng = np.random.default_rng(seed)
    columns = dict(table.columns)
    flip = rng.uniform(size=len(table)) < share
    columns["cos_theta_reco"] = np.where(flip, -1.0, 1.0) * columns["cos_theta_reco"]
    columns["stage"] = (rng.uniform(size=len(table)) < 0.1).astype(np.uint8)
    columns["pairing_class"] = np.where(
        flip & (columns["pairing_class"] == PairingClass.CORRECT),
        PairingClass.W_MIXED,
        columns["pairing_class"],
    )
    return EventTable(columns, table.samples, table.stages)


def test_values_and_errors_are_those_of_each_study():
    table = toy_table(3000, seed=2, **CAUSES)
    other = other_of(table)
    found = compare(rows_of(table), rows_of(other))
    for name in QUANTITIES:
        for rows, side in ((table, "first"), (other, "second")):
            r = getattr(accumulate(rows, selected(rows), rows["weight"]).result(), name)
            m = getattr(found[name], side)
            assert m.value == pytest.approx(r.value, abs=1e-12), name
            assert m.error == pytest.approx(r.error, rel=1e-9), name
        d = found[name]
        assert d.difference.value == pytest.approx(d.second.value - d.first.value)
    assert found["generated"].difference == dataclasses.replace(
        found["generated"].difference, value=0.0, error=0.0
    )
    assert found["generated"].significance == 0


def test_a_table_does_not_differ_from_itself_in_any_order():
    table = toy_table(1000, seed=2, **CAUSES)
    shuffled = table.take(np.random.default_rng(1).permutation(1000))
    found = compare(rows_of(table), rows_of(shuffled))
    for name in QUANTITIES:
        assert found[name].difference.value == pytest.approx(0, abs=1e-14)
        assert found[name].difference.error < 1e-14
    assert found.moved.value == 0
    assert np.count_nonzero(found.classes - np.diag(np.diagonal(found.classes))) == 0


def test_paired_errors_are_those_of_a_bootstrap_and_beat_unpaired_ones():
    table = toy_table(3000, seed=3, **CAUSES)
    other = other_of(table, share=0.05)
    found = compare(rows_of(table), rows_of(other))
    counts = replica_counts(table["id"], 9, 600)
    spread = {name: [] for name in QUANTITIES}
    for count in counts:
        r = compare(
            rows_of(table, weight=table["weight"] * count),
            rows_of(other, weight=other["weight"] * count),
        )
        for name in QUANTITIES:
            spread[name].append(r[name].difference.value)
    for name in QUANTITIES:
        d = found[name]
        # the spread of 600 replicas is known to 2.9 %; 3.5 sigma
        assert np.std(spread[name]) == pytest.approx(
            d.difference.error, rel=0.10, abs=1e-12
        )
    d = found["reconstructed"]
    assert d.difference.error < 0.6 * math.hypot(d.first.error, d.second.error)


def test_rows_are_counted_and_classes_followed():
    table = toy_table(1000, seed=4, wrong_b=0.3)
    other = other_of(table, share=0.5)
    a, b = table.take(slice(0, 900)), other.take(slice(100, 1000))
    found = compare(rows_of(a), rows_of(b))
    assert (found.common, found.only_first, found.only_second) == (800, 100, 100)
    kept = other["stage"][100:900] == 0
    assert found.selected_both == kept.sum()
    assert found.selected_first == 800 - kept.sum()
    assert found.selected_second == 0
    moved = (table["cos_theta_reco"] >= 0) != (other["cos_theta_reco"] >= 0)
    assert found.moved.value == pytest.approx(np.mean(moved[100:900][kept]))
    before = table["pairing_class"][100:900][kept]
    after = other["pairing_class"][100:900][kept]
    pair = (PairingClass.CORRECT, PairingClass.W_MIXED)
    assert found.classes[pair] == np.sum((before == pair[0]) & (after == pair[1]))
    assert found.classes.sum() == kept.sum()
    assert str(found).startswith("800 common events; A_FB reconstructed ")


def test_independent_tables_have_independent_errors():
    a = toy_table(1000, seed=1)
    b = toy_table(1000, seed=2, first_id=1000)  # one event in common
    found = compare(rows_of(a), rows_of(b))
    d = found["reconstructed"]
    assert found.common == 1
    assert d.difference.error == pytest.approx(
        math.hypot(d.first.error, d.second.error), rel=2e-3
    )


def test_nothing_selected_is_missing():
    table = toy_table(100)
    none = np.zeros(100, bool)
    found = compare(rows_of(table), rows_of(table, mask=none))
    assert math.isnan(found["reconstructed"].difference.value)
    assert math.isnan(found.moved.value)
    assert found["efficiency"].second.value == 0


def test_wrong_tables_are_explained():
    table = toy_table(10)
    twice = table.take(np.array([0, 0, 1]))
    with pytest.raises(StudyError, match="the second table has 1 repeated identities"):
        compare(rows_of(table), rows_of(twice))
    stranger = toy_table(10, first_id=1000)
    with pytest.raises(StudyError, match="they share no identity; reconstruct the sa"):
        compare(rows_of(table), rows_of(stranger))
