"""The same events through every format."""

from __future__ import annotations

import awkward as ak
import numpy as np
import pytest
import uproot

from tests.io import edm4hep_files
from tests.io.layouts import SHOWERED
from toprecon.io import FileLayout, open_events, write_events

N = 1500
NAME = "lepjets_500_LR"
EDM4HEP = FileLayout(
    format="edm4hep",
    edm4hep={
        name: {"collection": "JetCharges", "field": "parameters", "index": i}
        for i, name in enumerate(("track_charge", "vertex_charge"))
    },
)


@pytest.fixture(scope="module")
def sources(event_data, tmp_path_factory):
    """The same showered events in files of every format, opened."""
    folder = tmp_path_factory.mktemp("formats")
    original = event_data / "showered" / f"{NAME}.root"
    with uproot.open(original) as file:
        arrays = file["events"].arrays(how=dict, entry_stop=N)
    columns = {k: v for k, v in arrays.items() if k not in {"njt", "nil"}}
    paths = {k: folder / k for k in ("flat", "parquet", "own", "nested", "edm4hep")}
    for path in paths.values():
        path.mkdir()
    flat = paths["flat"] / f"{NAME}.root"
    with uproot.recreate(flat) as file:
        kinds = {k: ak.type(v).content for k, v in columns.items()}
        tree = file.mktree("events", {k: str(kind) for k, kind in kinds.items()})
        tree.extend(columns)
    layout = FileLayout(**_without_counters())
    parquet = paths["parquet"] / f"{NAME}.parquet"
    ak.to_parquet(ak.zip(columns, depth_limit=1), parquet)
    out = {
        "flat": open_events(flat, layout=layout),
        "parquet": open_events(parquet, layout=layout),
    }
    events = out["flat"].read()
    for key, suffix in (("own", "root"), ("nested", "parquet")):
        out[key] = open_events(write_events(events, paths[key] / f"{NAME}.{suffix}"))
    for convention in edm4hep_files.CONVENTIONS:
        made = edm4hep_files.from_events(events, np.arange(N))
        path = paths["edm4hep"] / convention.replace(" ", "_")
        path.mkdir()
        file = edm4hep_files.write(path / f"{NAME}.root", made, convention)
        out[f"edm4hep {convention}"] = open_events(file, layout=EDM4HEP, helicity="LR")
    return out


def _without_counters():
    """The layout of the showered files, for columns that carry their own counts."""
    from toprecon.io import load_layout

    data = load_layout(SHOWERED).to_mapping()
    for name in ("jets", "leptons", "particles"):
        for table in data[name]:
            table.pop("count")
    return data


def test_identities_are_the_same_in_every_format(sources):
    ids = {name: source.read().id.to_list() for name, source in sources.items()}
    first = ids.pop("flat")
    assert len(set(first)) == N
    for name, other in ids.items():
        assert other == first, name


def test_events_are_the_same_in_every_format(sources):
    first = sources["flat"].read()
    for name, source in sources.items():
        events = source.read()
        for field in ("E", "px", "py", "pz", "btag", "track_charge", "vertex_charge"):
            a, b = ak.flatten(first.jets[field]), ak.flatten(events.jets[field])
            # single precision, relative to momenta of up to 250 GeV
            assert np.allclose(a, b, rtol=1e-6, atol=5e-5), (name, field)
        for field in ("E", "px", "py", "pz", "charge", "pdg"):
            a, b = ak.flatten(first.leptons[field]), ak.flatten(events.leptons[field])
            assert np.allclose(a, b, rtol=1e-6, atol=5e-5), (name, field)
        for field in ("px", "py", "pz"):
            a, b = first.truth.top[field], events.truth.top[field]
            assert np.allclose(a, b, rtol=1e-6, atol=5e-5), (name, field)
        for field in ("weight", "helicity", "sqrt_s", "sample"):
            assert np.all(first[field] == events[field]), (name, field)


def test_the_event_table_is_the_same_in_every_format(sources):
    from toprecon import StudyPlan, reconstruct

    plan = StudyPlan()
    tables = {name: reconstruct(s.read(), plan) for name, s in sources.items()}
    first = tables.pop("flat")
    for name, table in tables.items():
        assert set(table.columns) == set(first.columns)
        for column in ("id", "stage", "is_signal", "sample", "weight"):
            assert np.array_equal(table[column], first[column]), (name, column)
        # rounding may turn the choice of nearly equal assignments in a rare event
        same = table["pairing_class"] == first["pairing_class"]
        assert same.sum() >= N - 2, name
        for column in ("cos_theta_true", "cos_theta_reco", "cos_theta_chosen"):
            a, b = first[column], table[column]
            close = np.isclose(a, b, rtol=0, atol=1e-4, equal_nan=True)
            assert close.sum() >= N - 2, (name, column)
