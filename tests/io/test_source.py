from __future__ import annotations

import concurrent.futures
import multiprocessing
import pickle

import awkward as ak
import numpy as np
import pytest
import uproot

from tests.io import flat_files
from tests.io.layouts import SHOWERED
from toprecon.errors import (
    InputError,
    OptionError,
    SkippedEventsWarning,
    TopreconWarning,
)
from toprecon.events import Helicity, samples_of, validate_events
from toprecon.io import (
    InputReport,
    Note,
    Reason,
    open_events,
    read_chunk,
    write_events,
)


@pytest.fixture
def showered(event_data):
    return event_data / "showered"


@pytest.fixture
def small(tmp_path):
    return flat_files.write(tmp_path / "small.root", flat_files.columns())


def same(a, b):
    return ak.array_equal(a, b, equal_nan=True, check_parameters=False)


def test_showered_events_hold_what_the_columns_say(showered):
    path = showered / "lepjets_500_LR.root"
    source = open_events(path, layout=SHOWERED)
    events = source.read()
    validate_events(events)
    tree = uproot.open(path)["events"]
    assert len(events) == tree.num_entries == 15000
    pt = tree["jt_pt"].array()
    assert np.allclose(ak.flatten(events.jets.pt), ak.flatten(pt), rtol=1e-6)
    assert np.all(ak.num(events.leptons) == tree["nil"].array())
    charge = ak.flatten(events.leptons.charge)
    assert np.all(charge == ak.flatten(tree["il_q"].array()))
    # leptons of negative charge have positive codes
    assert np.all(np.sign(ak.flatten(events.leptons.pdg)) == -charge)
    assert np.all(tree["gen_t_e"].array() == events.truth.top.E)
    assert np.all(events.truth.sqrt_s_prime == tree["ecm_eff"].array())
    assert np.all(tree["pmiss_e"].array() == events.missing.E)
    assert set(np.unique(events.helicity)) == {-1}
    sample = source.samples[0]
    assert (sample.name, sample.helicity) == ("lepjets_500_LR", Helicity.LR)
    assert (sample.entries, sample.sum_of_weights, sample.sqrt_s) == (15000, 15000, 500)
    assert len(np.unique(events.id)) == 15000
    assert source.report.accepted == 15000
    assert source.report.n_rejected == 0


def test_particles_get_the_masses_of_their_kinds(showered):
    source = open_events(showered / "lepjets_1400_LR.root", layout=SHOWERED)
    particles = ak.flatten(source.read(limit=200).particles)
    hadrons = particles[particles.kind == 0]
    # mass of the charged pion, Review of Particle Physics: 139.570 MeV
    assert np.allclose(np.median(hadrons.mass), 0.13957, atol=1e-3)
    photons = particles[particles.kind == 1]
    assert np.allclose(photons.E, photons.p, rtol=1e-12)
    assert ak.all(particles.charge[particles.kind == 2] == 0)


def test_zeros_of_the_truth_mean_absent(showered):
    source = open_events(showered / "ww_500.root", layout=SHOWERED, process="ww")
    events = source.read(limit=100)
    for name in ("top", "antitop", "b", "bbar"):
        for component in ("E", "px", "py", "pz"):
            assert np.all(np.isnan(events.truth[name][component]))
    assert np.all(np.isfinite(events.truth.w_plus.E))
    assert source.report.count(Note.NO_TRUTH) == 100
    assert source.samples[0].process == "ww"
    assert not source.samples[0].is_signal_process


def test_chunks_give_the_same_events_as_one_read(showered):
    source = open_events(
        [showered / "lepjets_1400_LR.root", showered / "lepjets_1400_RL.root"],
        layout=SHOWERED,
    )
    whole = source.read()
    parts = list(source.chunks(777))
    assert max(len(part) for part in parts) <= 777
    assert same(ak.concatenate(parts), whole)
    entries = [sum(samples_of(p)[i].entries for p in parts) for i in (0, 1)]
    assert entries == [s.entries for s in source.samples] == [2500, 2500]
    assert [s.entries for s in samples_of(whole)] == [2500, 2500]
    assert set(np.unique(whole.helicity)) == {-1, 1}


def test_all_files_of_a_source_give_the_same_fields(showered):
    names = ("ww_500", "lepjets_1400_LR")
    paths = [showered / f"{name}.root" for name in names]
    source = open_events(paths, layout=SHOWERED)
    parts = list(source.chunks())
    assert parts[0].fields == parts[1].fields
    assert ak.sum(ak.num(parts[0].particles)) == 0
    assert ak.sum(ak.num(parts[1].particles)) > 0


def test_a_chunk_is_the_same_in_another_process(showered):
    source = open_events(showered / "lepjets_1400_RL.root", layout=SHOWERED)
    refs = source.references(1000)
    assert sorted(refs) == refs
    assert [(r.start, r.stop) for r in refs] == [(0, 1000), (1000, 2000), (2000, 2500)]
    assert len({*refs, *pickle.loads(pickle.dumps(refs))}) == 3
    context = multiprocessing.get_context("spawn")
    with concurrent.futures.ProcessPoolExecutor(1, mp_context=context) as pool:
        there, report = pool.submit(read_chunk, refs[1], source.description).result()
    here = list(source.chunks(1000))[1]
    assert same(there, here)
    assert samples_of(there) == samples_of(here)
    assert (report.entries, report.accepted) == (1000, 1000)


def test_reading_stops_at_a_limit(small):
    source = open_events(small, layout=flat_files.LAYOUT)
    assert len(source.read(limit=3)) == 3
    assert source.report.entries == 3
    assert sum(len(part) for part in source.chunks(2, limit=5)) == 5


def test_a_file_without_entries_gives_no_events(tmp_path):
    data = flat_files.columns(0)
    path = flat_files.write(tmp_path / "none.root", data)
    source = open_events(path, layout=flat_files.LAYOUT)
    events = source.read()
    assert len(events) == 0
    assert source.references() == []
    assert {"jets", "leptons", "truth", "id"} <= set(events.fields)
    assert samples_of(events)[0].entries == 0


def broken(tmp_path, changes, **kwargs):
    """Open a file whose columns were changed at some events."""
    data = flat_files.columns()
    for name, event, value in changes:
        data[name][event] = value
    path = flat_files.write(tmp_path / "broken.root", data)
    return open_events(path, layout=flat_files.LAYOUT, **kwargs)


@pytest.mark.parametrize(
    ("changes", "reason"),
    [
        ([("jet_px", (2, 1), np.nan)], Reason.NOT_FINITE),
        ([("jet_E", (2, 1), np.inf)], Reason.NOT_FINITE),
        ([("jet_btag", (2, 1), np.inf)], Reason.NOT_FINITE),
        ([("lep_pz", (2, 0), np.nan)], Reason.NOT_FINITE),
        ([("weight", 2, np.nan)], Reason.NOT_FINITE),
        ([("top_E", 2, np.inf)], Reason.NOT_FINITE),
        ([("top_px", 2, np.nan)], Reason.BROKEN_TRUTH),
        ([("jet_E", (2, 3), -5.0)], Reason.NEGATIVE_ENERGY),
        ([("top_E", 2, -200.0)], Reason.NEGATIVE_ENERGY),
        ([("jet_E", (2, 3), 0.1)], Reason.SPACELIKE),
        ([("top_E", 2, 1.0)], Reason.SPACELIKE),
        ([("number", 2, 1)], Reason.DUPLICATE),
    ],
)
def test_an_unusable_event_is_rejected_and_counted(tmp_path, changes, reason):
    rest = broken(tmp_path, []).read()[np.arange(8) != 2]
    source = broken(tmp_path, changes)
    with pytest.warns(SkippedEventsWarning, match="1 of 8 entries are no events"):
        events = source.read()
    assert len(events) == 7
    assert source.report.count(reason) == source.report.n_rejected == 1
    assert "broken.root (entry 2)" in str(source.report)
    assert same(
        events[["jets", "leptons", "truth", "id"]],
        rest[["jets", "leptons", "truth", "id"]],
    )
    # the sum of weights is over all entries, rejected ones included
    assert source.samples[0].entries == 8
    lost = 1 if changes[0][0] == "weight" else 0
    assert source.samples[0].sum_of_weights == 8 - lost


def test_an_event_with_nothing_in_it_is_rejected(tmp_path):
    data = {
        name: values
        if values.ndim == 1
        else [[] if i == 3 else list(row) for i, row in enumerate(values)]
        for name, values in flat_files.columns().items()
    }
    path = flat_files.write(tmp_path / "empty.root", data)
    source = open_events(path, layout=flat_files.LAYOUT)
    with pytest.warns(SkippedEventsWarning):
        assert len(source.read()) == 7
    assert source.report.count(Reason.EMPTY) == 1


def test_columns_of_different_length_reject_only_that_event(tmp_path):
    data = flat_files.columns()
    rows = [list(row) for row in data["jet_py"]]
    rows[5] = rows[5][:-1]
    data["jet_py"] = rows
    path = flat_files.write(tmp_path / "ragged.root", data)
    source = open_events(path, layout=flat_files.LAYOUT)
    with pytest.warns(SkippedEventsWarning):
        events = source.read()
    assert source.report.count(Reason.INCONSISTENT) == 1
    good = flat_files.columns()["jet_py"][np.arange(8) != 5]
    assert ak.array_equal(events.jets.py, good, check_regular=False)


def test_a_wrong_counter_rejects_only_that_event(tmp_path):
    data = flat_files.columns()
    data["n"] = np.full(8, 4)
    data["n"][6] = 3
    path = flat_files.write(tmp_path / "counted.root", data)
    layout = flat_files.LAYOUT
    jets = layout.jets[0].replace(count="n")
    source = open_events(path, layout=layout.replace(jets=(jets,)))
    with pytest.warns(SkippedEventsWarning):
        assert len(source.read()) == 7
    assert source.report.count(Reason.INCONSISTENT) == 1


def test_a_value_outside_the_map_rejects_only_that_event(tmp_path):
    data = flat_files.columns()
    data["beam"] = np.array([1, 1, 1, 3, 1, 1, 1, 1])
    path = flat_files.write(tmp_path / "beams.root", data)
    event = flat_files.LAYOUT.event.replace(
        helicity={"branch": "beam", "values": {"1": "RL", "2": "LR"}}
    )
    source = open_events(path, layout=flat_files.LAYOUT.replace(event=event))
    with pytest.warns(SkippedEventsWarning):
        events = source.read()
    assert source.report.count(Reason.UNKNOWN_VALUE) == 1
    assert np.all(events.helicity == 1)


def test_strict_mode_makes_a_rejection_an_error(tmp_path):
    source = broken(tmp_path, [("jet_px", (2, 1), np.nan)], strict=True)
    with pytest.raises(InputError, match="every entry must be an event in strict mode"):
        source.read()
    assert len(broken(tmp_path, [], strict=True).read()) == 8


def test_few_jets_no_truth_and_negative_weights_are_kept_and_counted(tmp_path):
    data = flat_files.columns(n_jets=2)
    data["weight"][1] = -1.0
    for name in ("top", "antitop"):
        for component in flat_files.P4:
            data[f"{name}_{component}"][4] = 0.0
    path = flat_files.write(tmp_path / "kept.root", data)
    source = open_events(path, layout=flat_files.LAYOUT)
    assert len(source.read()) == 8
    report = source.report
    assert report.count(Note.FEW_JETS) == 8
    assert report.count(Note.NEGATIVE_WEIGHT) == 1
    assert report.count(Note.NO_TRUTH) == 1
    assert source.samples[0].sum_of_weights == 6.0
    assert "kept 1 of negative weight" in str(report)


def test_weights_that_are_all_zero_count_as_one(tmp_path):
    data = flat_files.columns()
    data["weight"][:] = 0.0
    path = flat_files.write(tmp_path / "zero.root", data)
    with pytest.warns(TopreconWarning, match="all weights are 0; every event counts"):
        source = open_events(path, layout=flat_files.LAYOUT)
    assert np.all(source.read().weight == 1.0)
    assert source.samples[0].sum_of_weights == 8.0


def test_duplicates_are_found_across_files_and_do_not_depend_on_chunks(tmp_path):
    first, second = flat_files.columns(seed=1), flat_files.columns(seed=2)
    second["number"] += 5
    paths = [
        flat_files.write(tmp_path / f"part{i}.root", data)
        for i, data in enumerate((first, second))
    ]
    for size in (3, 100):
        source = open_events({"one": paths}, layout=flat_files.LAYOUT)
        with pytest.warns(SkippedEventsWarning):
            events = ak.concatenate(list(source.chunks(size)))
        assert source.report.count(Reason.DUPLICATE) == 3
        assert len(events) == len(np.unique(events.id)) == 13
    by_place = flat_files.LAYOUT.replace(identity="entry")
    source = open_events({"one": paths}, layout=by_place)
    assert len(np.unique(source.read().id)) == 16


def test_event_numbers_that_are_all_equal_identify_nothing(tmp_path):
    data = flat_files.columns()
    data["number"][:] = 0
    path = flat_files.write(tmp_path / "same.root", data)
    source = open_events(path, layout=flat_files.LAYOUT)
    assert len(np.unique(source.read().id)) == 8
    assert any("all event numbers are 0" in text for text in source.report.messages)


def test_the_same_file_twice_is_an_error(small, tmp_path):
    copy = tmp_path / "copy.root"
    copy.write_bytes(small.read_bytes())
    with pytest.raises(InputError, match=r"copy\.root: has the same content as"):
        open_events([small, copy], layout=flat_files.LAYOUT)


def test_a_file_that_changed_is_not_read(small):
    source = open_events(small, layout=flat_files.LAYOUT)
    ref = source.references()[0]
    flat_files.write(small, flat_files.columns(seed=9))
    with pytest.raises(InputError, match="the content must be the one that was opened"):
        read_chunk(ref, source.description)


def test_a_reference_into_another_source_is_an_error(small, tmp_path):
    source = open_events(small, layout=flat_files.LAYOUT)
    other = flat_files.write(tmp_path / "other.root", flat_files.columns(seed=3))
    ref = open_events(other, layout=flat_files.LAYOUT).references()[0]
    with pytest.raises(InputError, match="not a file of this source"):
        read_chunk(ref, source.description)


def test_a_size_below_one_is_an_error(small):
    with pytest.raises(OptionError, match="at least one entry per chunk"):
        open_events(small, layout=flat_files.LAYOUT).references(0)


def test_what_is_stated_must_agree_with_the_file(showered):
    path = showered / "lepjets_500_LR.root"
    with pytest.raises(InputError, match="RL was stated, but the file says LR"):
        open_events(path, layout=SHOWERED, helicity="RL")
    with pytest.raises(InputError, match="sqrt_s = 365 GeV was stated"):
        open_events(path, layout=SHOWERED, sqrt_s=365.0)


def test_what_the_file_does_not_say_can_be_stated(small):
    source = open_events(small, layout=flat_files.LAYOUT, helicity="RL", process="x")
    events = source.read()
    assert np.all(events.helicity == 1)
    assert source.samples[0].helicity is Helicity.RL
    assert source.samples[0].process == "x"


def test_a_report_adds_and_survives_plain_data(tmp_path):
    source = broken(tmp_path, [("jet_px", (2, 1), np.nan)])
    with pytest.warns(SkippedEventsWarning):
        source.read()
    report = source.report
    assert InputReport.from_mapping(report.to_mapping()) == report
    twice = report + report
    assert (twice.entries, twice.count(Reason.NOT_FINITE)) == (16, 2)


def test_events_dropped_by_a_writer_stay_in_the_sums(tmp_path, small):
    events = open_events(small, layout=flat_files.LAYOUT).read()
    path = write_events(events[:3], tmp_path / "some.root")
    source = open_events(path)
    assert (source.samples[0].entries, source.samples[0].sum_of_weights) == (8, 8.0)
    parts = list(source.chunks(2))
    assert [samples_of(part)[0].entries for part in parts] == [7, 1]
    assert sum(samples_of(part)[0].sum_of_weights for part in parts) == 8.0
