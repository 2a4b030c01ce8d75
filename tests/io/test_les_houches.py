from __future__ import annotations

import gzip

import awkward as ak
import numpy as np
import pytest

from tests.require import require
from toprecon.errors import InputError, SkippedEventsWarning
from toprecon.io import Reason, describe, open_events
from toprecon.io.formats import open_reader

HEAD = """<LesHouchesEvents version="1.0">
<!-- a comment with <event> in it -->
<header>made for a test</header>
<init>
{a} {b} 250.0 2.5D+02 0 0 0 0 3 1
1.0 0.1 1.0 1
</init>
"""
ROW = "{:d} {:d} {:d} {:d} 0 0 {:.10e} {:.10e} {:.10e} {:.10e} {:.10e} 0. 9.\n"


def massless(code, status, mothers, px, py, pz, mass=0.0):
    energy = np.sqrt(px**2 + py**2 + pz**2 + mass**2)
    return ROW.format(code, status, *mothers, px, py, pz, energy, mass)


def pair_event(k=0, weight=1.5, electron_first=True):
    """A pair with one leptonic side; the k-th event is turned a little."""
    a = 0.1 * k
    turn = np.array([np.cos(a), np.sin(a)])
    rows = [
        massless(11 if electron_first else -11, -1, (0, 0), 0, 0, 250.0),
        massless(-11 if electron_first else 11, -1, (0, 0), 0, 0, -250.0),
        massless(6, 2, (1, 2), *(100 * turn), 150.0, mass=172.5),
        massless(-6, 2, (1, 2), *(-100 * turn), -150.0, mass=172.5),
        massless(24, 2, (3, 3), 60.0, 20.0, 90.0, mass=80.4),
        massless(5, 1, (3, 3), 40.0, -20.0, 60.0, mass=4.8),
        massless(-24, 2, (4, 4), -60.0, 20.0, -90.0, mass=80.4),
        massless(-5, 1, (4, 4), -40.0, -20.0, -60.0, mass=4.8),
        massless(2, 1, (5, 5), 50.0, 30.0, 60.0),
        massless(-1, 1, (5, 5), 10.0, -10.0, 30.0),
        massless(-14, 1, (7, 7), -50.0, 30.0, -60.0),
        massless(13, 1, (7, 7), -10.0, -10.0, -30.0),
        massless(22, 1, (1, 2), 0.0, 0.0, 5.0),
    ]
    return (
        f"<event>\n{len(rows)} 1 {weight} 500. 0.0078 0.118\n{''.join(rows)}"
        "# a comment\n<rwgt><wgt id='1'> 3.0 </wgt></rwgt>\n</event>\n"
    )


def write(path, events, electron_first=True, end="</LesHouchesEvents>\n"):
    a, b = (11, -11) if electron_first else (-11, 11)
    text = HEAD.format(a=a, b=b) + "".join(events) + end
    if path.suffix == ".gz":
        path.write_bytes(gzip.compress(text.encode()))
    else:
        path.write_text(text)
    return path


@pytest.mark.parametrize("name", ["x.lhe", "x.lhe.gz"])
def test_partons_become_perfect_jets(tmp_path, name):
    path = write(tmp_path / name, [pair_event(k) for k in range(5)])
    source = open_events(path)
    events = source.read()
    assert source.samples[0].name == "x"
    assert source.samples[0].sqrt_s == 500.0
    assert source.samples[0].sum_of_weights == 7.5
    assert ak.all(ak.num(events.jets) == 4)
    assert events.jets.btag[0].to_list() == [1, 1, 0, 0]
    # a b quark has charge -1/3
    assert np.allclose(events.jets.vertex_charge[0], [-1 / 3, 1 / 3, 0, 0])
    assert np.allclose(events.jets.track_charge[0], [-1 / 3, 1 / 3, 2 / 3, 1 / 3])
    assert events.leptons.pdg.to_list() == [[13]] * 5
    assert events.leptons.charge.to_list() == [[-1.0]] * 5
    assert np.allclose(events.missing.px, -50.0)
    assert np.allclose(events.photons.E[:, 0], 5.0)
    assert np.allclose(events.truth.top.px, 100 * np.cos(0.1 * np.arange(5)))
    assert np.all(events.truth.w_minus_down.pdg == 13)
    assert np.all(events.truth.w_plus_up.px == 50.0)
    parts = list(source.chunks(2))
    assert ak.array_equal(ak.concatenate(parts).jets.px, events.jets.px)
    assert len(np.unique(events.id)) == 5


def test_a_positron_as_first_beam_turns_the_events(tmp_path):
    path = write(tmp_path / "x.lhe", [pair_event(electron_first=False)], False)
    events = open_events(path).read()
    assert np.isclose(events.truth.top.pz[0], -150.0)
    assert np.isclose(events.truth.top.px[0], -100.0)
    assert np.isclose(events.truth.top.py[0], 0.0)


def test_the_boson_of_a_file_by_others_goes_where_the_electron_goes(event_data):
    path = event_data / "open" / "whizard_eeWW_500GeV_10evt.lhe"
    reader, _ = open_reader(str(path))
    frame, energy = reader.beam_frame()
    raw = reader.read(0, 10)
    reader.close()
    assert frame.flipped
    assert energy == 500.0
    w_minus = frame.to_electron_frame(raw.truth.p["w_minus"])[:, 0]
    assert np.isclose(raw.truth.p["w_minus"][3, 0], -142.8, atol=0.1)
    cos = w_minus[3] / np.sqrt((w_minus[1:] ** 2).sum())
    assert np.isclose(cos, 0.60, atol=0.01)
    # the bosons are not decayed, so there is nothing to reconstruct
    source = open_events(path)
    with pytest.warns(SkippedEventsWarning, match="10 of 10 entries"):
        source.read()
    assert source.report.count(Reason.EMPTY) == 10


def test_a_reference_reader_sees_the_same_numbers(tmp_path, event_data):
    pylhe = require("pylhe")
    made = write(tmp_path / "x.lhe", [pair_event(k) for k in range(4)])
    made.write_text(made.read_text().replace("D+02", "E+02"))
    for path in (made, event_data / "open" / "whizard_eeWW_500GeV_10evt.lhe"):
        reader, _ = open_reader(str(path))
        numbers = reader._numbers(0, reader.n_entries)
        reader.close()
        events = list(pylhe.LHEFile.fromfile(str(path)).events)
        assert len(events) == len(numbers.counts)
        theirs = [p for event in events for p in event.particles]
        assert [int(p.id) for p in theirs] == numbers.pdg.tolist()
        assert [int(p.status) for p in theirs] == numbers.status.tolist()
        for i, name in enumerate(("e", "px", "py", "pz")):
            assert np.array_equal([getattr(p, name) for p in theirs], numbers.p[i])
        weights = [event.eventinfo.weight for event in events]
        assert np.array_equal(weights, numbers.weight)


@pytest.mark.parametrize(
    "damage",
    [
        lambda text: text.replace("13 1 1.5", "14 1 1.5", 1),
        lambda text: text.replace("13 1 1.5", "-3 1 1.5", 1),
        lambda text: text.replace("9.\n", "9. 3.\n", 1),
        lambda text: text.replace(" 0. 9.\n", " zero 9.\n", 1),
        lambda _: "<event>\n</event>\n",
    ],
)
def test_a_damaged_event_is_rejected_alone(tmp_path, damage):
    events = [pair_event(k) for k in range(4)]
    events[2] = damage(events[2])
    source = open_events(write(tmp_path / "x.lhe", events))
    with pytest.warns(SkippedEventsWarning, match="1 of 4"):
        kept = source.read()
    assert source.report.count(Reason.INCONSISTENT) == 1
    assert np.allclose(kept.truth.top.px, 100 * np.cos([0.0, 0.1, 0.3]))


def test_incomplete_files_are_an_error(tmp_path):
    path = write(tmp_path / "x.lhe", [pair_event()], end="")
    with pytest.raises(InputError, match="a complete Les Houches file is required"):
        open_events(path)
    text = path.read_text().replace("</event>", "") + "</LesHouchesEvents>"
    path.write_text(text)
    with pytest.raises(InputError, match="1 beginnings and 0 ends"):
        open_events(path)
    path.write_text(
        '<LesHouchesEvents version="1.0">\n<init>\n</init>\n</LesHouchesEvents>'
    )
    with pytest.raises(
        InputError, match="codes and energies of the beams are required"
    ):
        open_events(path)
    packed = write(tmp_path / "x.lhe.gz", [pair_event(k) for k in range(50)])
    packed.write_bytes(packed.read_bytes()[:-40])
    with pytest.raises(InputError, match=r"x\.lhe\.gz"):
        open_events(packed)


def test_other_beams_are_said(tmp_path):
    path = write(tmp_path / "x.lhe", [pair_event()])
    path.write_text(path.read_text().replace("\n11 -11 250", "\n13 -13 250"))
    source = open_events(path)
    assert any("beams are 13 and -13" in text for text in source.report.messages)


def test_marks_across_blocks_are_found(tmp_path, monkeypatch):
    from toprecon.io import les_houches

    path = write(tmp_path / "x.lhe", [pair_event(k) for k in range(6)])
    whole = open_events(path).read()
    for block in (997, 1000, 4001):
        monkeypatch.setattr(les_houches, "_BLOCK", block)
        again = open_events(path).read()
        assert ak.array_equal(again.jets.px, whole.jets.px)


def test_it_is_described(tmp_path):
    text = str(describe(write(tmp_path / "x.lhe", [pair_event()])))
    assert "Les Houches, 1 entries" in text
    assert "event.weight <- XWGTUP" in text
