from __future__ import annotations

import json
import tomllib

import awkward as ak
import numpy as np
import pytest

from tests.io import flat_files
from tests.io.layouts import SHOWERED
from toprecon.errors import InputError, UnknownFormatError
from toprecon.io import FileLayout, describe, load_layout, open_events, write_events


def test_an_unknown_flat_file_gets_a_layout_to_start_from(event_data):
    path = event_data / "showered" / "lepjets_500_LR.root"
    found = describe(path)
    assert found.kind == "ROOT, unknown layout"
    assert found.entries == 15000
    assert found.mapped["jets.btag"] == "jt_bdisc"
    assert found.mapped["truth.w_plus_down.pdg"] == "gen_wp_dn_pdg"
    assert set(found.missing) == {"particles", "event.helicity"}
    proposed = FileLayout(**tomllib.loads(found.layout.to_toml()))
    mine = open_events(path, layout=SHOWERED).read(limit=50)
    guessed = open_events(path, layout=proposed).read(limit=50)
    for name in ("jets", "truth", "id", "missing"):
        if name == "truth":
            assert ak.array_equal(mine.truth.top, guessed.truth.top)
        else:
            assert ak.array_equal(mine[name], guessed[name])
    text = str(found)
    assert "jets.btag <- jt_bdisc" in text
    assert "missing: particles, event.helicity" in text
    assert "not used: pol_em (int8_t)" in text
    assert text.endswith(found.layout.to_toml().rstrip())
    assert (
        json.loads(json.dumps(found.to_mapping()))["layout"] == found.layout.to_toml()
    )


def test_counted_arrays_of_others_are_recognised_and_said(event_data):
    path = event_data / "open" / "uproot-HZZ.root"
    found = describe(path)
    assert found.mapped["muons.isolation"] == "Muon_Iso"
    assert found.layout.jets[0].count == "NJet"
    source = open_events(path)
    with pytest.warns(UserWarning, match="5 of 2421 entries"):
        events = source.read()
    assert any("understood by their names" in text for text in source.report.messages)
    import uproot

    tree = uproot.open(path)["events"]
    n = tree["NMuon"].array() + tree["NElectron"].array()
    some = (n + tree["NJet"].array()) > 0
    assert ak.all(ak.num(events.leptons) == n[some])
    assert set(np.abs(ak.flatten(events.leptons.pdg))) == {11, 13}
    assert np.all(events.weight == tree["EventWeight"].array()[some])


def test_energies_in_mev_are_noticed(tmp_path):
    data = {f"Jet_{c}": 1000 * flat_files.columns()[f"jet_{c}"] for c in flat_files.P4}
    path = flat_files.write(tmp_path / "x.root", data)
    found = describe(path)
    assert found.layout.energy_unit == "MeV"
    events = open_events(path).read()
    assert np.allclose(events.jets.E, flat_files.columns()["jet_E"])


def test_known_files_are_described_by_their_own_layout(event_data, tmp_path):
    layout = load_layout(SHOWERED)
    path = event_data / "showered" / "ww_500.root"
    events = open_events(path, layout=layout).read(limit=20)
    for suffix in ("root", "parquet"):
        found = describe(write_events(events, tmp_path / f"own.{suffix}"))
        assert "own layout" in found.kind
        assert found.notes == ("samples: ww_500",)
        assert found.missing == ("particles", "event.number")
    found = describe(path, layout=layout)
    assert found.layout == layout
    assert found.notes == (
        "not in the file: pf_cls, pf_eta, pf_jet, pf_phi, pf_pt, pf_q",
    )


def test_collections_are_described(event_data):
    path = event_data / "open" / "edm4hep_schema3_CLD_ZHnunubb_jettags_1evt.root"
    found = describe(path)
    assert found.kind == "ROOT, EDM4hep"
    assert found.mapped["jets"] == "RefinedVertexJets"
    assert found.mapped["jets.btag"] == "RefinedJetTag_B, likelihood"
    assert "podio_metadata" in found.trees
    assert 'format = "edm4hep"' in str(found)


def test_files_without_known_jets_are_described_without_a_layout(tmp_path):
    import uproot

    path = tmp_path / "x.root"
    with uproot.recreate(path) as file:
        file.mktree("events", {"a": "float64"}).extend({"a": np.ones(3)})
    found = describe(path)
    assert found.layout is None
    assert found.columns == {"a": "double"}
    assert "write a layout by hand" in str(found)


def test_what_is_no_event_file_is_an_error(tmp_path):
    path = tmp_path / "x.root"
    with pytest.raises(InputError, match="no such file"):
        describe(path)
    path.write_text("hello")
    with pytest.raises(UnknownFormatError, match="a ROOT, Parquet or Les Houches file"):
        describe(path)
