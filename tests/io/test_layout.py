from __future__ import annotations

import tomllib

import awkward as ak
import numpy as np
import pytest

from tests.io import flat_files
from tests.io.layouts import SHOWERED
from toprecon.errors import InputError, OptionError
from toprecon.io import FileLayout, load_layout, open_events
from toprecon.io.own_layout import own_layout

JETS = {"pt": "a", "eta": "b", "phi": "c", "m": "d"}


@pytest.mark.parametrize(
    "layout",
    [
        load_layout(SHOWERED),
        own_layout(),
        own_layout("."),
        flat_files.LAYOUT,
        FileLayout(format="edm4hep", edm4hep={"jets": "Jets"}),
        FileLayout(
            energy_unit="MeV",
            jets=[{**JETS, "zero_is_absent": True}],
            beams={"electron_direction": "-z", "crossing_angle": 0.02},
        ),
    ],
)
def test_a_layout_survives_toml(layout, tmp_path):
    text = layout.to_toml()
    assert FileLayout(**tomllib.loads(text)) == layout
    assert load_layout(layout.save(tmp_path / "x.toml")) == (
        layout if layout.name else layout.replace(name="x")
    )


def test_the_layout_of_the_showered_files_is_named_after_its_file():
    assert load_layout(SHOWERED).name == "showered"


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"jetz": JETS}, r"jetz: unknown option; did you mean 'jets'\?"),
        ({}, r"a layout of columns needs the columns of the jets"),
        ({"jets": {"pt": "a"}}, r"a momentum needs px, py, pz or pt, eta, phi .* pt"),
        (
            {"jets": {**JETS, "E": "e"}},
            r"one of E and m; got E, eta, m, phi, pt",
        ),
        (
            {"jets": {**JETS, "btagg": "x"}},
            r"btagg: unknown option; did you mean 'btag'",
        ),
        (
            {"jets": {**JETS, "btag": {"branch": "x", "value": 1.0}}},
            r"name either a column \(branch\) or a constant \(value\)",
        ),
        (
            {"jets": {**JETS, "btag": {"branch": "x", "values": {"yes": 1.0}}}},
            r"the keys of values must be numbers; got 'yes'",
        ),
        ({"jets": {**JETS, "slots": [1, 2]}}, r"slots: give the numbers and \{slot\}"),
        ({"jets": JETS, "energy_unit": "keV"}, r"energy_unit: must be one of GeV, MeV"),
        ({"jets": JETS, "identity": "name"}, r"identity: must be 'auto', 'number'"),
        (
            {"jets": JETS, "beams": {"electron_direction": "up"}},
            r"electron_direction: must be '\+z', '-z' or 'auto'; got 'up'",
        ),
        (
            {"jets": JETS, "beams": {"crossing_angle": 3.0}},
            r"crossing_angle: must be between -0.5 and 0.5 rad; got 3.0",
        ),
        (
            {"jets": JETS, "beams": {"crossing_angle": "wide"}},
            r"crossing_angle: must be an angle in rad or 'auto'; got 'wide'",
        ),
    ],
)
def test_a_wrong_layout_is_explained(settings, message):
    with pytest.raises(OptionError, match=message):
        FileLayout(**settings)


def test_a_wrong_layout_file_is_named(tmp_path):
    with pytest.raises(
        InputError, match=r"no\.toml: a file layout in TOML is required"
    ):
        load_layout(tmp_path / "no.toml")
    path = tmp_path / "bad.toml"
    path.write_text("jets = [")
    with pytest.raises(InputError, match=r"bad\.toml: .* not valid TOML"):
        load_layout(path)
    path.write_text("[jetz]\npt = 'a'")
    with pytest.raises(OptionError, match=r"bad\.toml: .*jetz: unknown option"):
        load_layout(path)


def jets_in(tmp_path, data, **settings):
    """Jets of a file with some columns through a layout."""
    path = flat_files.write(tmp_path / f"{len(list(tmp_path.iterdir()))}.root", data)
    return open_events(path, layout=FileLayout(**settings)).read(), path


def test_every_coordinate_system_gives_the_same_momenta(tmp_path, rng):
    n = 20
    px, py, pz = rng.normal(0, 30, (3, n, 4))
    m = rng.uniform(1, 10, (n, 4))
    p = np.sqrt(px**2 + py**2 + pz**2)
    energy = np.sqrt(p**2 + m**2)
    pt, phi, theta = np.hypot(px, py), np.arctan2(py, px), np.arccos(pz / p)
    eta = -np.log(np.tan(theta / 2))
    columns = {"px": px, "py": py, "pz": pz, "m": m, "p": p, "E": energy}
    columns |= {"pt": pt, "phi": phi, "theta": theta, "eta": eta}
    for direction in (("px", "py", "pz"), ("pt", "eta", "phi"), ("p", "theta", "phi")):
        for rest in ("E", "m"):
            names = (*direction, rest)
            for unit, factor in (("GeV", 1.0), ("MeV", 1000.0)):
                data = {
                    k: columns[k] * (1 if k in {"eta", "phi", "theta"} else factor)
                    for k in names
                }
                events, _ = jets_in(
                    tmp_path, data, jets={k: k for k in names}, energy_unit=unit
                )
                for name, values in (("E", energy), ("px", px), ("pz", pz)):
                    # pure arithmetic in double precision
                    assert np.allclose(events.jets[name], values, rtol=1e-10, atol=1e-9)


def test_numbered_columns_become_jets(tmp_path):
    data = {}
    for i, energy in ((1, [50.0, 60.0]), (2, [40.0, np.nan])):
        for name, factor in (("E", 1.0), ("px", 0.6), ("py", 0.8), ("pz", 0.0)):
            data[f"jet{i}_{name}"] = factor * np.array(energy)
        data[f"jet{i}_tag"] = np.array([0.1 * i, 0.2 * i])
    events, _ = jets_in(
        tmp_path,
        data,
        jets={
            **{c: f"jet{{slot}}_{c}" for c in ("E", "px", "py", "pz")},
            "btag": "jet{slot}_tag",
            "slots": [1, 2],
        },
    )
    assert events.jets.E.to_list() == [[50.0, 40.0], [60.0]]
    assert events.jets.btag.to_list() == [[0.1, 0.2], [0.2]]


def test_arrays_of_fixed_length_are_cut_by_their_counter(tmp_path):
    import uproot

    path = tmp_path / "fixed.root"
    values = np.arange(1, 13, dtype=float).reshape(2, 6)
    with uproot.recreate(path) as file:
        tree = file.mktree("events", {"E": "6*float64", "z": "6*float64", "n": "int32"})
        tree.extend({"E": values, "z": values * 0.5, "n": np.array([2, 5], np.int32)})
    layout = FileLayout(jets={"E": "E", "px": 0.0, "py": 0.0, "pz": "z", "count": "n"})
    jets = open_events(path, layout=layout).read().jets
    assert jets.E.to_list() == [[1.0, 2.0], [7.0, 8.0, 9.0, 10.0, 11.0]]


def test_electrons_and_muons_apart_become_leptons_in_order(tmp_path):
    data = flat_files.columns(3)
    for name in flat_files.P4:
        data[f"el_{name}"] = data.pop(f"lep_{name}") * 2
        data[f"mu_{name}"] = data[f"el_{name}"] / 2
    data["el_q"] = np.array([[1], [-1], [1]])
    data["mu_q"] = np.array([[-1], [-1], [1]])
    tables = [
        {c: f"{kind}_{c}" for c in flat_files.P4} | {"charge": f"{kind}_q", "pdg": code}
        for kind, code in (("el", 11), ("mu", 13))
    ]
    events, _ = jets_in(
        tmp_path, data, jets={c: f"jet_{c}" for c in flat_files.P4}, leptons=tables
    )
    assert events.leptons.pdg.to_list() == [[-11, 13], [11, 13], [-11, -13]]
    assert events.leptons.charge.to_list() == [[1, -1], [-1, -1], [1, 1]]
    assert np.allclose(events.leptons.E[:, 0], 2 * events.leptons.E[:, 1])


def test_objects_of_zeros_can_mean_absent(tmp_path):
    data = flat_files.columns(3)
    for name in flat_files.P4:
        data[f"jet_{name}"][1, 2] = 0.0
    jets = {c: f"jet_{c}" for c in flat_files.P4}
    events, _ = jets_in(tmp_path, data, jets={**jets, "zero_is_absent": True})
    assert ak.num(events.jets).to_list() == [4, 3, 4]


def test_an_electron_beam_along_minus_z_turns_the_events(tmp_path):
    data = flat_files.columns(5)
    jets = {c: f"jet_{c}" for c in flat_files.P4}
    plain, _ = jets_in(tmp_path, data, jets=jets)
    turned, _ = jets_in(tmp_path, data, jets=jets, beams={"electron_direction": "-z"})
    for name, sign in (("E", 1), ("px", -1), ("py", 1), ("pz", -1)):
        assert ak.array_equal(turned.jets[name], sign * plain.jets[name])


def test_a_crossing_angle_is_removed(tmp_path):
    half = 0.5 * 0.03
    beams = np.array(
        [[1.0, np.sin(half), 0.0, np.cos(half)], [1.0, np.sin(half), 0, -np.cos(half)]]
    )
    data = {c: 250 * beams[:, i].reshape(1, 2) for i, c in enumerate(flat_files.P4)}
    events, _ = jets_in(
        tmp_path,
        data,
        jets={c: c for c in flat_files.P4},
        beams={"crossing_angle": 0.03},
    )
    jets = events.jets[0]
    assert np.allclose(jets.px, 0, atol=1e-10)
    assert np.allclose(jets.pz, [250 * np.cos(half), -250 * np.cos(half)])
    assert np.isclose(np.sum(jets.E), 500 * np.cos(half))


def test_a_missing_column_is_named_with_its_section_and_the_nearest(tmp_path):
    path = flat_files.write(tmp_path / "x.root", flat_files.columns())
    jets = {c: f"jet_{c}" for c in flat_files.P4}
    layout = FileLayout(name="mine", jets={**jets, "btag": "jet_btagg"})
    message = (
        r"x\.root: column 'jet_btagg' is required by \[jets\] of layout 'mine', but is "
        r"missing; did you mean 'jet_btag'\?"
    )
    with pytest.raises(InputError, match=message):
        open_events(path, layout=layout)
    layout = FileLayout(jets=jets, event={"number": "event_number"})
    with pytest.raises(InputError, match=r"'event_number' is required by \[event\]"):
        open_events(path, layout=layout)


def test_an_optional_part_is_all_there_or_not_at_all(tmp_path):
    path = flat_files.write(tmp_path / "x.root", flat_files.columns())
    jets = {c: f"jet_{c}" for c in flat_files.P4}
    absent = {c: f"pf_{c}" for c in flat_files.P4} | {"optional": True}
    events = open_events(path, layout=FileLayout(jets=jets, particles=absent)).read()
    assert "particles" not in events.fields
    partly = {**absent, "E": "jet_E"}
    with pytest.raises(InputError, match=r"'pf_px' is required by \[particles\]"):
        open_events(path, layout=FileLayout(jets=jets, particles=partly))


def test_columns_of_the_wrong_shape_are_named(tmp_path):
    data = flat_files.columns()
    path = flat_files.write(tmp_path / "x.root", data)
    jets = {c: f"jet_{c}" for c in flat_files.P4}
    wrong = (
        ({**jets, "btag": "weight"}, {}, r"column 'weight': a list per event"),
        (
            jets,
            {"weight": "jet_E"},
            r"column 'jet_E': one number per event is required",
        ),
        (jets, {"number": "weight"}, r"column 'weight': one whole number per event"),
    )
    for table, event, message in wrong:
        with pytest.raises(InputError, match=message):
            open_events(path, layout=FileLayout(jets=table, event=event)).read()


def test_a_column_of_text_is_named(tmp_path):
    import uproot

    path = tmp_path / "text.root"
    data = {**{c: ak.Array([[1.0], [2.0]]) for c in flat_files.P4}, "w": ["a", "b"]}
    with uproot.recreate(path) as file:
        kinds = {k: "string" if k == "w" else "var * float64" for k in data}
        file.mktree("events", kinds).extend(data)
    layout = FileLayout(jets={c: c for c in flat_files.P4}, event={"weight": "w"})
    with pytest.raises(InputError, match=r"text\.root: w: numbers are required"):
        open_events(path, layout=layout)
