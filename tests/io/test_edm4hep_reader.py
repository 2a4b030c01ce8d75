from __future__ import annotations

import warnings

import awkward as ak
import numpy as np
import pytest
import uproot

from tests.io import edm4hep_files
from tests.io.layouts import SHOWERED
from toprecon.errors import InputError, TopreconWarning, UnknownFormatError
from toprecon.io import FileLayout, Note, describe, open_events
from toprecon.io.collection_ids import collection_id
from toprecon.io.edm4hep_collections import Collections, stored_ids
from toprecon.io.generated import links
from toprecon.io.root_columns import RootColumns

CHARGES = {
    name: {"collection": "JetCharges", "field": "parameters", "index": i}
    for i, name in enumerate(("track_charge", "vertex_charge"))
}
LAB = {"electron_direction": "+z", "crossing_angle": 0.0}


def layout(beams=None, **options):
    return FileLayout(format="edm4hep", edm4hep=options, beams=beams or {})


@pytest.fixture(scope="module")
def simulated_higgs(event_data):
    return event_data / "open" / "edm4hep_schema3_CLD_ZHnunubb_jettags_1evt.root"


@pytest.fixture(scope="module")
def particle_flow(event_data):
    return event_data / "open" / "edm4hep_schema1_ILD_PandoraPFOs_10evt.root"


@pytest.fixture(scope="module")
def events(event_data):
    path = event_data / "showered" / "lepjets_1400_LR.root"
    return open_events(path, layout=SHOWERED).read(limit=120)


@pytest.fixture(scope="module")
def collections(events):
    return edm4hep_files.from_events(events, np.arange(len(events)))


def test_collection_numbers_are_hashes_of_names(simulated_higgs):
    # numbers stored by podio in a file written by others
    with uproot.open(simulated_higgs) as file:
        stored = stored_ids(file)
    assert len(stored) > 100
    assert all(collection_id(name) == number for name, number in stored.items())


def test_the_fully_simulated_event_is_read_as_its_writers_meant(simulated_higgs):
    with pytest.warns(TopreconWarning, match="all weights are 0"):
        source = open_events(simulated_higgs, layout=layout(LAB))
    events = source.read()
    assert events.weight.to_list() == [1.0]
    jets, particles = events.jets[0], events.particles[0]
    assert np.allclose(jets.E, [57.437, 49.725], atol=1e-3)
    assert np.allclose(jets.btag, [0.976, 0.988], atol=1e-3)
    assert np.isclose((jets[0] + jets[1]).mass, 100.18, atol=5e-3)
    assert [int(np.sum(particles.jet_index == j)) for j in (0, 1)] == [27, 16]
    for j in (0, 1):
        mine = particles[particles.jet_index == j]
        for component in ("E", "px", "py", "pz"):
            total = np.sum(mine[component])
            assert np.isclose(total, jets[component][j], rtol=1e-5, atol=1e-4)
    assert source.report.count(Note.NO_TRUTH) == 1


def test_beams_show_their_crossing_angle_and_energy(simulated_higgs):
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", TopreconWarning)
        source = open_events(simulated_higgs)
    frame = source.description.files[0].frame
    # a 30 mrad crossing at 240 GeV: both beams carry 1.8 GeV along x
    assert np.isclose(frame.crossing_angle, 0.030, atol=1e-6)
    assert not frame.flipped
    assert np.isclose(source.samples[0].sqrt_s, 240.0, atol=0.1)
    events = source.read()
    assert np.isclose(events.missing.E[0], 240 - np.sum(events.particles.E), atol=0.1)


def test_every_daughter_has_its_parent(simulated_higgs):
    columns = RootColumns(str(simulated_higgs))
    file = Collections(columns, columns.collection_ids())
    names = [
        f"MCParticles.{m}_{e}"
        for m in ("parents", "daughters")
        for e in ("begin", "end")
    ]
    branches = {
        m: file.relation_branch("MCParticles", m) for m in ("parents", "daughters")
    }
    values = columns.read([*names, *(f"{b}.index" for b in branches.values())], 0, 1)
    pairs = {}
    for member, branch in branches.items():
        stored = values[f"{branch}.index"]
        begin, end = (values[f"MCParticles.{member}_{e}"] for e in ("begin", "end"))
        source, target = links(
            stored.values, stored.counts, begin.values, end.values, begin.counts
        )
        pairs[member] = set(zip(source.tolist(), target.tolist(), strict=True))
    columns.close()
    closed = {(child, parent) for parent, child in pairs["daughters"]}
    assert len(closed) == len(pairs["parents"]) == 209
    assert closed == pairs["parents"]


def test_the_quarks_of_the_boson_are_its_daughters(simulated_higgs):
    with uproot.open(simulated_higgs) as file:
        tree = file["events"]
        pdg = tree["MCParticles.PDG"].array()[0]
        begin, end = (
            tree[f"MCParticles.parents_{e}"].array()[0] for e in ("begin", "end")
        )
        index = tree["_MCParticles_parents.index"].array()[0]
    for code in (5, -5):
        first = int(np.flatnonzero(pdg == code)[0])
        assert 25 in pdg[index[begin[first] : end[first]]]


def test_particle_flow_files_without_jets_and_truth_are_read(particle_flow):
    source = open_events(particle_flow)
    events = source.read()
    assert len(events) == 10
    n = ak.num(events.particles) + ak.num(events.leptons)
    assert n.to_list() == [79, 70, 52, 24, 38, 15, 42, 37, 48, 31]
    visible = ak.sum(events.particles.E, axis=1) + ak.sum(events.leptons.E, axis=1)
    assert np.isclose(visible[0], 222.67, atol=0.01)
    assert np.all(events.weight == 1.0)
    assert "truth" not in events.fields
    assert source.report.count(Note.NO_TRUTH) == 10
    assert "truth" in describe(particle_flow).missing
    assert ak.all(ak.num(events.jets) == 0)


def test_counters_for_values_in_an_example_file_are_rejected_not_lost(event_data):
    path = event_data / "open" / "edm4hep_schema6_example_ttree_3evt.root"
    source = open_events(path)
    with pytest.warns(TopreconWarning, match="3 of 3 entries are no events"):
        assert len(source.read()) == 0
    assert source.report.entries == 3


@pytest.mark.parametrize("convention", edm4hep_files.CONVENTIONS)
@pytest.mark.parametrize("copies", [1, 3])
def test_every_convention_gives_the_same_events(events, convention, copies, tmp_path):
    made = edm4hep_files.from_events(events, np.arange(len(events)), copies=copies)
    path = edm4hep_files.write(tmp_path / "lepjets_1400_LR.root", made, convention)
    again = open_events(path, layout=layout(**CHARGES)).read()
    assert ak.array_equal(again.id, events.id)
    assert np.all(again.sqrt_s == 1400.0)
    # members are stored in single precision
    for name in ("jets", "leptons", "particles"):
        for field in set(events[name].fields) - {"isolation"}:
            a, b = ak.flatten(events[name][field]), ak.flatten(again[name][field])
            assert np.allclose(a, b, rtol=1e-6, atol=1e-4), (name, field)
    for name in events.truth.fields:
        if name == "sqrt_s_prime":
            # mantissas of the stored momenta were cut: 2^-6 GeV
            assert np.allclose(again.truth[name], events.truth[name], atol=0.1)
            continue
        for field in events.truth[name].fields:
            a, b = events.truth[name][field], again.truth[name][field]
            # energies follow from mass and momentum, whose mantissas were cut
            loose = 0.1 if field == "E" else 1e-4
            assert np.allclose(a, b, rtol=1e-6, atol=loose), (name, field)
    assert np.allclose(again.missing.px, events.missing.px, rtol=1e-6)


def test_leptons_and_photons_come_through_subsets(events, collections, tmp_path):
    made = {k: v for k, v in collections.items() if k != "IsolatedLeptons"}
    kind = events.particles.kind
    for convention in edm4hep_files.CONVENTIONS:
        local = ak.local_index(kind)
        subsets = {
            "Muon": (local[kind == 4][:, :1], "PandoraPFOs"),
            "Electron": (local[kind == 3][:, :1], "PandoraPFOs"),
            "Photon": (local[kind == 1][:, :2], "PandoraPFOs"),
        }
        path = edm4hep_files.write(tmp_path / "s.root", made, convention, subsets)
        again = open_events(path).read()
        first = events.particles[kind == 4][:, :1]
        muons = again.leptons[np.abs(again.leptons.pdg) == 13]
        assert np.allclose(ak.flatten(muons.E), ak.flatten(first.E), rtol=1e-6)
        assert ak.all(muons.charge == -np.sign(muons.pdg))
        n = ak.num(again.particles) + ak.num(again.leptons)
        assert ak.all(n == ak.num(events.particles))
        photons = events.particles[kind == 1][:, :2]
        assert np.allclose(
            ak.flatten(again.photons.px), ak.flatten(photons.px), rtol=1e-6, atol=1e-5
        )


def test_subset_entries_out_of_range_are_dropped(events, collections, tmp_path):
    made = {k: v for k, v in collections.items() if k != "IsolatedLeptons"}
    index = ak.unflatten(np.tile([-2, 0, 100_000], len(events)), 3)
    path = edm4hep_files.write(
        tmp_path / "s.root", made, "tree", {"Muon": (index, "PandoraPFOs")}
    )
    assert ak.all(ak.num(open_events(path).read().leptons) == 1)


def test_isolated_leptons_are_selected_from_the_particles(tmp_path):
    # a muon alone, a muon in a jet, a soft electron alone, and the jet's other part
    p = np.array(
        [[40.0, 40, 0, 0], [30.0, 0, 30, 0], [5.0, 0, 0, -5], [60.0, 0, 59.9, 3.4]]
    )
    from toprecon.events import momenta

    particles = momenta(p.T, [4])
    made = {
        "PandoraPFOs": (
            edm4hep_files.reco(particles, [-1, 1, 1, 0], [13, -13, -11, 22]),
            {},
            {},
        )
    }
    path = edm4hep_files.write(tmp_path / "x.root", made)
    events = open_events(path).read()
    assert events.leptons.pdg.to_list() == [[13]]
    assert events.leptons.isolation.to_list() == [[0.0]]
    assert np.allclose(events.particles.E[0], [30, 5, 60])
    assert events.particles.kind.to_list() == [[4, 3, 1]]
    loose = layout(isolation={"maximum": 10.0, "minimum_energy": 1.0})
    events = open_events(path, layout=loose).read()
    assert events.leptons.pdg.to_list() == [[13, -13, -11]]
    assert np.isclose(events.leptons.isolation[0, 1], 2.0, rtol=1e-6)


def tagged(events, collections, name, identification):
    """Collections with another b score."""
    made = {k: v for k, v in collections.items() if k != "RefinedJetTag_B"}
    return {**made, name: identification}


def test_bits_of_a_tag_word_become_a_score(events, collections, tmp_path):
    word = ak.values_astype(ak.local_index(events.jets.E) % 4, np.float64)
    made = tagged(
        events,
        collections,
        "Jets_HF_tags",
        edm4hep_files.identification(events.jets, parameters=[word]),
    )
    path = edm4hep_files.write(tmp_path / "x.root", made)
    again = open_events(path).read()
    assert again.jets.btag[0].to_list() == [0.0, 1.0, 0.0, 1.0]
    rule = {"collection": "Jets_HF_tags", "field": "parameters", "bit": 1}
    again = open_events(path, layout=layout(tag=rule)).read()
    assert again.jets.btag[0].to_list() == [0.0, 0.0, 1.0, 1.0]
    again = open_events(path, layout=layout(tag={"none": True})).read()
    assert np.all(np.isnan(ak.flatten(again.jets.btag)))


def test_jets_that_point_to_their_tags_are_read(events, collections, tmp_path):
    # the older link: the jet has a range of identifications
    jets = events.jets
    word = ak.values_astype(ak.local_index(jets.E) % 2, np.float64)
    members, _, vectors = edm4hep_files.identification(
        jets, parameters=[word, 0 * word]
    )
    made = tagged(events, collections, "ParticleIDs", (members, {}, vectors))
    jet_members, relations, _ = made["Jets"]
    local = ak.local_index(jets.E)
    counts = ak.num(jets)
    flat = ak.flatten(local)
    jet_members = {
        **jet_members,
        "particleIDs_begin": edm4hep_files.ragged(flat, counts, np.uint32),
        "particleIDs_end": edm4hep_files.ragged(flat + 1, counts, np.uint32),
    }
    backwards = (counts - 1 - local, "ParticleIDs")
    made["Jets"] = (jet_members, {**relations, "particleIDs": backwards}, {})
    path = edm4hep_files.write(tmp_path / "x.root", made)
    again = open_events(path).read()
    assert again.jets.btag[0].to_list() == [1.0, 0.0, 1.0, 0.0]


def test_the_rule_of_the_user_chooses_the_flavour(events, collections, tmp_path):
    members, relations, vectors = edm4hep_files.identification(
        events.jets, likelihood=events.jets.btag * 0 + 0.25, pdg=4
    )
    made = tagged(events, collections, "Flavours", (members, relations, vectors))
    path = edm4hep_files.write(tmp_path / "x.root", made)
    for pdg, value in ((4, 0.25), (5, np.nan)):
        rule = {"collection": "Flavours", "field": "likelihood", "pdg": pdg}
        again = open_events(path, layout=layout(tag=rule)).read()
        expected = np.full(len(ak.flatten(again.jets.btag)), value)
        assert np.allclose(ak.flatten(again.jets.btag), expected, equal_nan=True)
    rule = {"collection": "Flavors", "field": "likelihood"}
    with pytest.raises(
        InputError, match=r"'Flavors' is required for the jets, but is "
    ):
        open_events(path, layout=layout(tag=rule)).read()


def test_dangling_and_impossible_ranges_never_stop_the_reading(
    events, collections, tmp_path
):
    members, relations, _ = collections["MCParticles"]
    n = len(events)
    rng = np.random.default_rng(3)
    flat = ak.to_numpy(ak.flatten(relations["daughters"][0]))
    noise = np.where(
        rng.random(len(flat)) < 0.2, rng.integers(-5, 10**6, len(flat)), flat
    )
    counts = ak.num(relations["daughters"][0])
    broken = dict(members)
    for end in ("daughters_end", "parents_end"):
        values = ak.to_numpy(ak.flatten(members[end])).copy()
        values[rng.random(len(values)) < 0.1] = 2**32 - 5
        broken[end] = ak.unflatten(values, ak.num(members[end]))
    made = {
        **collections,
        "MCParticles": (
            broken,
            {**relations, "daughters": (ak.unflatten(noise, counts), "MCParticles")},
            {},
        ),
    }
    jet_members, jet_relations, _ = made["Jets"]
    ends = ak.to_numpy(ak.flatten(jet_members["particles_end"])).copy()
    ends[::7] = 2**32 - 1
    made["Jets"] = (
        {
            **jet_members,
            "particles_end": ak.unflatten(ends, ak.num(jet_members["particles_end"])),
        },
        jet_relations,
        {},
    )
    path = edm4hep_files.write(tmp_path / "x.root", made)
    again = open_events(path).read()
    assert len(again) == n
    # what is found is right, what is not found is absent
    top = again.truth.top
    found = np.isfinite(ak.to_numpy(top.E))
    assert found.any()
    assert np.allclose(top.px[found], events.truth.top.px[found], rtol=1e-6, atol=1e-6)


def test_an_electron_beam_along_minus_z_is_noticed(events, tmp_path):
    made = edm4hep_files.from_events(events, np.arange(len(events)))
    for collection in (
        "Jets",
        "PandoraPFOs",
        "IsolatedLeptons",
        "MissingET",
        "MCParticles",
    ):
        members = made[collection][0]
        for axis in ("momentum.x", "momentum.z"):
            members[axis] = -members[axis]
    path = edm4hep_files.write(tmp_path / "x.root", made)
    source = open_events(path)
    assert source.description.files[0].frame.flipped
    again = source.read()
    assert np.allclose(
        ak.flatten(again.jets.pz), ak.flatten(events.jets.pz), rtol=1e-6, atol=1e-5
    )
    assert np.allclose(again.truth.top.pz, events.truth.top.pz, atol=1e-4)


def test_a_missing_collection_is_named_with_the_nearest(collections, tmp_path):
    path = edm4hep_files.write(tmp_path / "x.root", collections)
    with pytest.raises(InputError, match=r"collection 'Jetz' is required for jets"):
        open_events(path, layout=layout(jets="Jetz"))
    with pytest.raises(InputError, match=r"did you mean 'IsolatedLeptons'"):
        open_events(path, layout=layout(leptons=["IsolatedLepton"]))


def test_a_flat_file_is_no_edm4hep(event_data):
    path = event_data / "showered" / "ww_500.root"
    with pytest.raises(UnknownFormatError, match="collections of EDM4hep are required"):
        open_events(path, layout=layout())


def test_particles_may_be_a_subset(events, collections, tmp_path):
    kind = events.particles.kind
    local = ak.local_index(kind)
    charged = (local[(kind != 1) & (kind != 2)], "PandoraPFOs")
    path = edm4hep_files.write(
        tmp_path / "x.root", collections, "tree", {"ChargedPFOs": charged}
    )
    again = open_events(path, layout=layout(particles="ChargedPFOs")).read()
    mine = events.particles[(kind != 1) & (kind != 2)]
    assert ak.all(again.particles.jet_index == mine.jet_index)
    assert np.allclose(ak.flatten(again.particles.E), ak.flatten(mine.E), rtol=1e-6)


def test_a_lepton_is_not_among_the_particles_even_without_a_link(tmp_path):
    from toprecon.events import momenta

    p = np.array([[40.0, 40, 0, 0], [30.0, 0, 30, 0], [60.0, 0, 59.9, 3.4]])
    both = {
        "PandoraPFOs": edm4hep_files.reco(momenta(p.T, [3]), -1, [13, 211, 211]),
        "IsoLeptons": edm4hep_files.reco(momenta(p.T[:, :1], [1]), -1, 13),
    }
    made = {name: (members, {}, {}) for name, members in both.items()}
    path = edm4hep_files.write(tmp_path / "x.root", made)
    events = open_events(path).read()
    assert events.leptons.E.to_list() == [[40.0]]
    assert np.allclose(events.particles.E[0], [30, 60])


def test_a_missing_member_is_named(collections, tmp_path):
    members, relations, vectors = collections["RefinedJetTag_B"]
    less = {k: v for k, v in members.items() if k != "PDG"}
    made = {**collections, "RefinedJetTag_B": (less, relations, vectors)}
    path = edm4hep_files.write(tmp_path / "x.root", made)
    with pytest.raises(InputError, match=r"column 'RefinedJetTag_B.PDG' is required"):
        open_events(path).read()


def test_a_subset_into_nowhere_is_an_error(collections, tmp_path):
    made = {k: v for k, v in collections.items() if k != "PandoraPFOs"}
    members, _, vectors = made["Jets"]
    made["Jets"] = (members, {}, vectors)
    index = ak.unflatten(np.zeros(len(members["energy"]), int), 1)
    path = edm4hep_files.write(
        tmp_path / "x.root", made, "tree", {"Muon": (index, "Nothing")}
    )
    with pytest.raises(InputError, match="that subset 'Muon' points into is required"):
        open_events(path)
