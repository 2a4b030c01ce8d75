from __future__ import annotations

import awkward as ak
import numpy as np
import pytest
import uproot

from tests.io.layouts import SHOWERED
from toprecon.errors import InputError, MissingFieldError, OptionError
from toprecon.events import Helicity, Sample, make_events, momenta, samples_of
from toprecon.io import open_events, write_events


@pytest.fixture(scope="module")
def events(event_data):
    names = ("ww_500", "lepjets_1400_LR")
    paths = [event_data / "showered" / f"{name}.root" for name in names]
    return open_events(paths, layout=SHOWERED).read()


@pytest.mark.parametrize("suffix", ["root", "parquet"])
def test_what_is_written_is_read_back_identical(events, suffix, tmp_path):
    path = write_events(events, tmp_path / f"own.{suffix}")
    source = open_events(path)
    again = source.read()
    assert again.fields == events.fields
    for name in events.fields:
        assert ak.array_equal(
            again[name], events[name], equal_nan=True, check_parameters=False
        )
    assert samples_of(again) == samples_of(events)
    assert list(tmp_path.iterdir()) == [path]
    chunks = list(source.chunks(1000))
    joined = ak.concatenate(chunks)
    assert ak.array_equal(joined.id, events.id)
    assert ak.array_equal(joined.jets.E, events.jets.E, check_parameters=False)


@pytest.mark.parametrize("suffix", ["root", "parquet"])
def test_single_precision_halves_the_file_and_keeps_seven_digits(
    events, suffix, tmp_path
):
    double = write_events(events, tmp_path / f"double.{suffix}")
    single = write_events(events, tmp_path / f"single.{suffix}", precision="single")
    assert single.stat().st_size < 0.7 * double.stat().st_size
    again = open_events(single).read()
    assert np.allclose(ak.flatten(again.jets.px), ak.flatten(events.jets.px), rtol=1e-6)
    assert ak.array_equal(again.id, events.id)


@pytest.mark.parametrize("suffix", ["root", "parquet"])
def test_events_without_optional_parts_and_without_rows_are_kept(suffix, tmp_path):
    sample = Sample("bare", "ww", Helicity.RL, 365.0, generated=7, entries=0)
    for n in (0, 2):
        counts = np.arange(n)
        p = np.tile([[50.0], [0.0], [30.0], [40.0]], int(counts.sum()))
        fields = {
            "jets": momenta(p, counts, btag=np.full(p.shape[1], 0.5)),
            "leptons": momenta(p, counts, charge=np.ones(p.shape[1])),
            "weight": np.ones(n),
            "sample": np.zeros(n, np.int16),
            "helicity": np.ones(n, np.int8),
            "sqrt_s": np.full(n, 365.0),
            "id": np.arange(n, dtype=np.uint64) + 2**63,
        }
        path = tmp_path / f"bare{n}.{suffix}"
        source = open_events(write_events(make_events(fields, [sample]), path))
        if n:
            # the first event has no object at all
            assert source.entries == 2
            with pytest.warns(UserWarning, match="1 of 2 entries are no events"):
                again = source.read()
            assert again.id.to_list() == [2**63 + 1]
            assert np.isnan(again.jets.track_charge[0][0])
        else:
            again = source.read()
            assert len(again) == 0
        assert "truth" not in again.fields
        assert samples_of(again)[0].process == "ww"
        assert samples_of(again)[0].generated == 7


def test_a_failed_write_leaves_nothing_behind(events, tmp_path):
    target = tmp_path / "x.root"
    target.write_bytes(b"before")
    bad = ak.with_field(events, np.full(len(events), np.nan), "weight")
    with pytest.raises(InputError, match=r"events\.weight: must be finite"):
        write_events(bad, target)
    odd = ak.with_field(events, ak.Array(["x"] * len(events)), "helicity")
    with pytest.raises(InputError, match="helicity: numbers are required"):
        write_events(odd, target)
    assert target.read_bytes() == b"before"
    assert list(tmp_path.iterdir()) == [target]


def test_wrong_requests_are_explained(events, tmp_path):
    with pytest.raises(InputError, match=r"written to \.root or \.parquet files; got"):
        write_events(events, tmp_path / "x.csv")
    with pytest.raises(OptionError, match="must be 'double' or 'single'; got 'half'"):
        write_events(events, tmp_path / "x.root", precision="half")
    with pytest.raises(MissingFieldError, match="field 'jets' is required"):
        write_events(events[["leptons"]], tmp_path / "x.root")


def test_damaged_descriptions_of_samples_are_an_error(events, tmp_path):
    path = write_events(events[:5], tmp_path / "x.root")
    with uproot.update(path) as file:
        file["toprecon_samples"] = '{"version": 1, "samples": [{"nam": 1}]}'
    with pytest.raises(InputError, match=r"x\.root: the descriptions of its samples"):
        open_events(path)
    with uproot.update(path) as file:
        file["toprecon_samples"] = '{"version": 99, "samples": []}'
    with pytest.raises(InputError, match="events of version 1 are required; got 99"):
        open_events(path)
