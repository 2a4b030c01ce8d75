from __future__ import annotations

import awkward as ak
import numpy as np
import pytest

from toprecon.errors import InputError, MissingFieldError
from toprecon.events import (
    EVENT_FIELDS,
    TOPS_FIELDS,
    Sample,
    concatenate_events,
    has_truth,
    make_events,
    momenta,
    require_fields,
    samples_of,
    validate_events,
    with_samples,
)

SAMPLE = Sample("x", entries=2, sum_of_weights=2.0)


def _columns(n=2, **changes):
    p = np.tile(np.array([[5.0], [0], [0], [3]]), n)
    columns = {
        "jets": momenta(p, [1] * n, btag=np.full(n, 0.5)),
        "leptons": momenta(p, [1] * n, charge=np.ones(n)),
        "weight": np.ones(n),
        "sample": np.zeros(n, np.int16),
        "helicity": np.full(n, -1, np.int8),
        "sqrt_s": np.full(n, 500.0),
        "id": np.arange(n, dtype=np.uint64),
    }
    return {**columns, **changes}


def _events(n=2, samples=(SAMPLE,), **changes):
    return make_events(_columns(n, **changes), samples)


def test_made_events_are_valid_and_carry_their_samples():
    events = _events()
    validate_events(events)
    assert [s.to_mapping() for s in samples_of(events)] == [SAMPLE.to_mapping()]
    assert set(events.fields) <= set(EVENT_FIELDS)


def test_samples_survive_slices_and_masks():
    events = _events(4)
    for part in (events[:2], events[events.weight > 0], events[[1, 0]]):
        assert samples_of(part)[0].name == "x"


@pytest.mark.parametrize("n", [0, 1])
def test_no_events_are_valid_too(n):
    events = _events(n)
    validate_events(events)
    assert len(events) == n
    assert has_truth(events).shape == (n,)


def test_columns_of_different_lengths_are_refused():
    with pytest.raises(
        InputError, match=r"events: columns must have the same length; got .*'id': 3"
    ):
        _events(id=np.arange(3, dtype=np.uint64))


@pytest.mark.parametrize("name", ["jets", "leptons", "weight", "sample", "id"])
def test_a_missing_field_is_named(name):
    columns = _columns()
    del columns[name]
    with pytest.raises(MissingFieldError, match=f"events: field '{name}' is required"):
        validate_events(make_events(columns, (SAMPLE,)))


def test_the_nearest_field_is_offered():
    with pytest.raises(
        MissingFieldError,
        match="tops: field 'chi' is required; did you mean 'chi2'",
    ):
        require_fields(ak.Array([{"chi2": 1, "gap": 2}]), ["chi"], where="tops")


def test_events_without_descriptions_are_refused():
    events = ak.Array(_events().layout)
    with pytest.raises(MissingFieldError, match=r"required in events.attrs\['samples'"):
        validate_events(events)
    validate_events(with_samples(events, (SAMPLE,)))


@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_weights_that_are_no_numbers_are_refused(bad):
    events = _events(weight=np.array([1.0, bad]))
    with pytest.raises(InputError, match=r"mine.weight: must be finite; got NaN"):
        validate_events(events, where="mine")


@pytest.mark.parametrize("name", ["jets", "leptons"])
@pytest.mark.parametrize("part", ["E", "px", "py", "pz"])
def test_momenta_that_are_no_numbers_are_refused(name, part):
    p = np.array([[5.0, 5.0], [0, 0], [0, 0], [3, 3]])
    p["E px py pz".split().index(part), 1] = np.nan  # noqa: SIM905
    events = _events(**{name: momenta(p, [1, 1])})
    with pytest.raises(InputError, match=rf"events.{name}.{part}: must be finite"):
        validate_events(events)


def test_jets_without_momenta_are_refused():
    events = _events(jets=ak.Array([[{"E": 1.0}], []]))
    with pytest.raises(MissingFieldError, match=r"events.jets: field 'px' is required"):
        validate_events(events)


def test_truth_is_there_only_if_both_tops_are():
    good, bad = np.ones((4, 3)), np.ones((4, 3))
    good[:, 1] = np.nan
    bad[:, 2] = np.nan
    truth = ak.zip({"top": momenta(good), "antitop": momenta(bad)}, depth_limit=1)
    assert has_truth(_events(3, truth=truth)).tolist() == [True, False, False]
    assert has_truth(_events(3)).tolist() == [False] * 3


def test_joined_parts_add_their_descriptions():
    other = SAMPLE.replace(entries=3, sum_of_weights=3.0)
    joined = concatenate_events([_events(2), _events(3, (other,))])
    assert len(joined) == 5
    (sample,) = samples_of(joined)
    assert (sample.entries, sample.sum_of_weights) == (5, 5.0)


def test_one_part_is_itself():
    (sample,) = samples_of(concatenate_events([_events(2)]))
    assert sample.entries == 2


def test_parts_that_do_not_fit_are_refused():
    with pytest.raises(InputError, match="events: at least one part is required"):
        concatenate_events([])
    with pytest.raises(InputError, match=r"same list of samples; got .'x'. and .'y'."):
        concatenate_events([_events(), _events(samples=(Sample("y"),))])
    extra = _events(photons=momenta(np.zeros((4, 0)), [0, 0]))
    with pytest.raises(InputError, match="parts have different fields"):
        concatenate_events([_events(), extra])
    with pytest.raises(InputError, match="its parts must be described alike"):
        concatenate_events([_events(), _events(samples=(Sample("x", "ww"),))])


def test_every_field_is_explained():
    assert all(text.strip() for text in (*EVENT_FIELDS.values(), *TOPS_FIELDS.values()))
