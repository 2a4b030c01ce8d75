from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.toys import selected, toy_table
from toprecon.asymmetry import STEPS, accumulate
from toprecon.events import PairingClass
from toprecon.treelevel import beam_fractions

CAUSES = {
    "acceptance": {"loss": 0.3},
    "resolution": {"resolution": 0.4},
    "wrong_b": {"wrong_b": 0.3},
    "wrong_w": {"wrong_w": 0.3},
    "unmatched": {"unmatched": 0.3},
    "charge": {"charge": 0.2},
    "outside": {"outside": 0.2},
    "background": {"background": 0.2},
}


def result_of(table, mask=None, weight=None):
    mask = selected(table) if mask is None else mask
    weight = table["weight"] if weight is None else weight
    return accumulate(table, mask, weight).result()


@st.composite
def tables(draw):
    share = st.floats(0, 0.25)
    kind = draw(st.sampled_from(["unit", "positive", "signed"]))
    makers = {
        "unit": None,
        "positive": lambda rng, n: rng.exponential(1.0, n),
        "signed": lambda rng, n: rng.normal(1.0, 0.6, n),
    }
    return toy_table(
        draw(st.integers(20, 400)),
        seed=draw(st.integers(0, 2**31)),
        asymmetry=draw(st.floats(-0.7, 0.7)),
        loss=draw(share),
        resolution=draw(st.floats(0, 0.3)),
        wrong_b=draw(share),
        wrong_w=draw(share),
        unmatched=draw(share),
        flip_forward=draw(st.floats(0, 1)),
        flip_backward=draw(st.floats(0, 1)),
        charge=draw(share),
        outside=draw(share),
        background=draw(share),
        weights=makers[kind],
    )


@given(tables(), st.floats(0, 20), st.lists(st.integers(0, 400), max_size=5))
def test_the_steps_add_up_for_any_weights_cuts_and_chunking(table, cut, borders):
    mask = selected(table) & (table["toy.quality"] < cut)
    edges = [0, *sorted(min(b, len(table)) for b in borders), len(table)]
    total = None
    for low, high in itertools.pairwise(edges):
        part = table.take(slice(low, high))
        sums = accumulate(part, mask[low:high], part["weight"])
        total = sums if total is None else total + sums
    result = total.result()
    budget = result.budget
    signal = table["weight"][mask & table["is_signal"]].sum()
    if abs(signal) < 0.5 or abs(table["weight"][mask].sum()) < 0.5:
        return  # weights of both signs that cancel: no asymmetry to speak of
    size = max(1.0, *(abs(s.shift.value) for s in budget.steps))
    assert abs(budget.closure) < 1e-12 * size
    reco = table["cos_theta_reco"]
    w = np.where(mask, table["weight"], 0.0)
    brute = (w[reco >= 0].sum() - w[reco < 0].sum()) / w.sum()
    assert budget.reconstructed.value == pytest.approx(brute, rel=1e-9, abs=1e-12)


@pytest.mark.parametrize("cause", CAUSES)
def test_a_single_cause_is_named_and_the_others_are_exactly_zero(cause):
    table = toy_table(60_000, seed=5, flip_backward=0.1, **CAUSES[cause])
    budget = result_of(table).budget
    for step in budget.steps:
        if step.name == cause:
            assert abs(step.shift.value) > 4 * step.shift.error > 0
        else:
            assert step.shift.value == 0
            # rounding: squared sums of some 1e4 events
            assert step.shift.error < 1e-9
    assert budget.total.value == pytest.approx(budget[cause].shift.value, abs=1e-13)
    assert list(STEPS) == [step.name for step in budget.steps]


def test_nothing_is_shifted_in_a_perfect_reconstruction():
    budget = result_of(toy_table(5000)).budget
    assert [step.shift.value for step in budget.steps] == [0.0] * len(STEPS)
    assert budget.total.error < 1e-9


def test_every_step_agrees_with_its_definition_by_brute_force():
    table = toy_table(
        3000,
        seed=9,
        loss=0.2,
        resolution=0.2,
        wrong_b=0.2,
        wrong_w=0.1,
        unmatched=0.2,
        charge=0.1,
        outside=0.05,
        background=0.1,
        weights=lambda rng, n: rng.exponential(1.0, n),
    )
    mask = selected(table)
    budget = result_of(table).budget
    w, signal = table["weight"], table["is_signal"]
    sign = {
        name: np.where(table[f"cos_theta_{name}"] >= 0, 1.0, -1.0)
        for name in ("true", "closest", "chosen", "reco")
    }

    def mean(values, rows):
        return np.average(values[rows], weights=w[rows])

    good = mask & signal
    kind = table["pairing_class"]

    def step(later, earlier, classes):
        rows = good & np.isin(kind, classes)
        return (w * (sign[later] - sign[earlier]))[rows].sum() / w[good].sum()

    c = PairingClass
    f_accepted = w[good].sum() / w[signal].sum()
    lost = signal & ~mask
    outside = mask & ~signal & table.is_signal_process
    other = mask & ~table.is_signal_process
    all_selected = w[mask].sum()
    a_signal = mean(sign["reco"], good)
    expected = {
        "acceptance": (1 - f_accepted)
        * (mean(sign["true"], good) - mean(sign["true"], lost)),
        "resolution": step("closest", "true", [c.CORRECT, c.B_SWAPPED, c.W_MIXED]),
        "wrong_b": step("chosen", "closest", [c.B_SWAPPED]),
        "wrong_w": step("chosen", "closest", [c.W_MIXED]),
        "unmatched": step("chosen", "true", [c.UNMATCHED]),
        "charge": step("reco", "chosen", list(c)),
        "outside": w[outside].sum()
        / all_selected
        * (mean(sign["reco"], outside) - a_signal),
        "background": w[other].sum()
        / all_selected
        * (mean(sign["reco"], other) - a_signal),
    }
    for name, value in expected.items():
        assert budget[name].shift.value == pytest.approx(value, abs=1e-12), name


def test_shares_say_how_many_events_each_step_is_about():
    table = toy_table(4000, loss=0.3, wrong_b=0.2, unmatched=0.3, background=0.2)
    mask = selected(table)
    budget = result_of(table).budget
    signal, kind = table["is_signal"], table["pairing_class"]
    good = mask & signal
    assert budget["acceptance"].share == pytest.approx(
        np.mean(~mask[signal]), rel=1e-12
    )
    assert budget["wrong_b"].share == pytest.approx(
        np.mean(kind[good] == PairingClass.B_SWAPPED), rel=1e-12
    )
    assert budget["unmatched"].share == pytest.approx(
        np.mean(kind[good] == PairingClass.UNMATCHED), rel=1e-12
    )
    assert budget["background"].share == pytest.approx(
        np.mean(~table.is_signal_process[mask]), rel=1e-12
    )
    assert budget["outside"].share == 0


def test_covariance_of_the_steps_has_their_errors_and_adds_up_to_the_total():
    table = toy_table(
        5000, loss=0.2, wrong_b=0.2, wrong_w=0.1, unmatched=0.2, charge=0.1
    )
    budget = result_of(table).budget
    errors = [step.shift.error for step in budget.steps]
    assert np.sqrt(np.diagonal(budget.covariance).clip(min=0)) == pytest.approx(errors)
    assert math.sqrt(budget.covariance.sum()) == pytest.approx(
        budget.total.error, rel=1e-9
    )


def test_an_empty_table_has_missing_steps():
    table = toy_table(10).take(slice(0, 0))
    budget = result_of(table).budget
    assert math.isnan(budget.total.value)
    assert all(math.isnan(step.share) for step in budget.steps)
    assert str(budget["acceptance"].shift) == "missing"


@given(
    tables(),
    tables(),
    st.floats(1e-3, 1e3),
    st.floats(1e-3, 1e3),
    st.floats(-1, 1),
    st.floats(-1, 1),
)
def test_the_steps_add_up_for_any_mix_of_beams(
    left, right, s_l, s_r, electron, positron
):
    w_left, w_right = beam_fractions(electron, positron)
    if w_left + w_right < 1e-3:
        return  # nothing collides
    parts = []
    for table, factor in ((left, w_left * s_l), (right, w_right * s_r)):
        # weights of one sign here: sums that cancel have no asymmetry
        weight = np.abs(table["weight"]) + 0.1
        parts.append(accumulate(table, selected(table), weight).scaled(factor))
    budget = (parts[0] + parts[1]).result().budget
    if math.isnan(budget.total.value):
        return  # nothing selected
    assert abs(budget.closure) < 1e-12
    errors = np.array([step.shift.error for step in budget.steps])
    assert math.sqrt(max(budget.covariance.sum(), 0.0)) == pytest.approx(
        budget.total.error, abs=1e-9
    )
    assert np.isfinite(errors).all()
