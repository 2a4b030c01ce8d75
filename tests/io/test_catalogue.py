from __future__ import annotations

import math

import numpy as np
import pytest

from tests.io import flat_files
from tests.io.layouts import SHOWERED
from toprecon.errors import InputError, OptionError
from toprecon.events import Helicity
from toprecon.io import Catalogue, load_catalogue, open_events, write_events

TEXT = f"""
layout = "{SHOWERED}"

[samples.signal_LR]
files = ["lepjets_500_LR.root"]
helicity = "LR"
sqrt_s = 500.0
cross_section = 1523.0

[samples.ww]
files = "ww_*.root"
process = "ww"
generated = 5000
cross_section = 6603.0
cross_section_lr = 26000.0
cross_section_rl = 150.0
"""


@pytest.fixture
def catalogue(tmp_path, event_data):
    path = tmp_path / "catalogue.toml"
    folder = event_data / "showered"
    text = TEXT.replace('["lep', f'["{folder}/lep').replace('"ww_*', f'"{folder}/ww_*')
    path.write_text(text)
    return path


def test_a_catalogue_opens_and_names_its_samples(catalogue):
    source = open_events(catalogue)
    signal, ww = source.samples
    assert (signal.name, signal.process, signal.helicity) == (
        "signal_LR", "ttbar", Helicity.LR
    )  # fmt: skip
    assert signal.cross_section_lr == 1523.0
    assert math.isnan(signal.cross_section_rl)
    assert math.isnan(signal.cross_section)
    assert (ww.process, ww.helicity) == ("ww", Helicity.MIXED)
    assert (ww.cross_section, ww.cross_section_lr) == (6603.0, 26000.0)
    events = source.read()
    assert len(events) == 15000 + 4737
    assert np.all((events.sample == 1) == (np.arange(len(events)) >= 15000))


def test_a_list_of_one_catalogue_is_that_catalogue(catalogue):
    names = [sample.name for sample in open_events([catalogue]).samples]
    assert names == [sample.name for sample in open_events(catalogue).samples]


def test_dropped_events_are_said_and_enter_the_normalisation(catalogue):
    source = open_events(catalogue)
    ww = source.samples[1]
    assert (ww.entries, ww.generated) == (4737, 5000)
    # all weights are 1, so the sum over all generated events is their number
    assert ww.stated_sum_of_weights == ww.normalisation == 5000.0
    text = "sample 'ww': 4737 entries of 5000 generated events are in the files"
    assert text in source.report.messages


def small_catalogue(tmp_path, text, weights=None, name="a"):
    data = flat_files.columns()
    if weights is not None:
        data["weight"] = np.asarray(weights, dtype=float)
    flat_files.write(tmp_path / f"{name}.root", data)
    flat_files.LAYOUT.save(tmp_path / "flat.toml")
    path = tmp_path / "catalogue.toml"
    path.write_text(f'layout = "flat.toml"\n[samples.one]\nfiles = ["a.root"]\n{text}')
    return path


def test_paths_are_relative_to_the_catalogue(tmp_path, monkeypatch):
    path = small_catalogue(tmp_path, "")
    elsewhere = tmp_path / "elsewhere"
    elsewhere.mkdir()
    monkeypatch.chdir(elsewhere)
    assert len(open_events(path).read()) == 8
    assert len(open_events(catalogue=load_catalogue(path)).read()) == 8


def test_unequal_weights_need_their_stated_sum(tmp_path):
    weights = [1, 2, 1, 1, 1, 1, 1, 1]
    source = open_events(small_catalogue(tmp_path, "generated = 10", weights))
    assert math.isnan(source.samples[0].stated_sum_of_weights)
    assert "state sum_of_weights in the catalogue" in source.report.messages[0]
    text = "generated = 10\nsum_of_weights = 11.5"
    source = open_events(small_catalogue(tmp_path, text, weights))
    assert source.samples[0].normalisation == 11.5


def test_more_entries_than_were_generated_is_an_error(tmp_path):
    path = small_catalogue(tmp_path, "generated = 5")
    with pytest.raises(InputError, match=r"at most the 5 generated .* hold 8 entries"):
        open_events(path)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (
            "crosssection = 1.0",
            r"crosssection: unknown option; did you mean 'cross_sec",
        ),
        ('helicity = "left"', r"helicity: must be LR, RL or MIXED; got 'left'"),
        ("cross_section = -1.0", r"cross_section: must be >= 0 fb; got -1.0"),
        (
            'helicity = "LR"\ncross_section_rl = 1.0',
            r"cross_section_rl is stated for a sample of LR beams",
        ),
        (
            'helicity = "RL"\nelectron_polarisation = 0.8',
            r"polarisations are stated for a sample of pure RL beams",
        ),
        ("electron_polarisation = 2.0", r"electron_polarisation: must be <= 1"),
    ],
)
def test_a_wrong_catalogue_is_explained(tmp_path, text, message):
    path = small_catalogue(tmp_path, text)
    with pytest.raises(OptionError, match=rf"(?s)catalogue\.toml: .*{message}"):
        open_events(path)


def test_missing_parts_of_a_catalogue_are_named(tmp_path):
    with pytest.raises(InputError, match="a catalogue of samples in TOML is required"):
        open_events(tmp_path / "none.toml")
    path = tmp_path / "c.toml"
    path.write_text("[samples]\n")
    with pytest.raises(OptionError, match="at least one sample is required"):
        open_events(path)
    path.write_text("[samples.x]\nfiles = []\n")
    with pytest.raises(OptionError, match="at least one file is required"):
        open_events(path)
    path.write_text('[samples.x]\nfiles = ["x_*.root"]\n')
    with pytest.raises(InputError, match=r"sample 'x': .*x_\*\.root: .* it fits none"):
        open_events(path)


def test_files_and_a_catalogue_exclude_each_other(tmp_path):
    path = small_catalogue(tmp_path, "")
    with pytest.raises(
        OptionError, match="files or a catalogue are required; got both"
    ):
        open_events(tmp_path / "a.root", catalogue=path)
    with pytest.raises(OptionError, match="are required; got neither"):
        open_events()
    with pytest.raises(OptionError, match="a catalogue says layout, process"):
        open_events(path, process="ttbar")


def test_a_catalogue_survives_toml(tmp_path):
    catalogue = load_catalogue(small_catalogue(tmp_path, "generated = 9"))
    again = load_catalogue(catalogue.save(tmp_path / "again.toml"))
    assert again == catalogue
    assert again.folder == catalogue.folder == tmp_path
    assert Catalogue(**catalogue.to_mapping()).samples == catalogue.samples


def test_a_catalogue_renames_the_sample_of_an_own_file(tmp_path):
    flat_files.write(tmp_path / "a.root", flat_files.columns())
    other = flat_files.write(tmp_path / "b.root", flat_files.columns(seed=2))
    one = open_events(tmp_path / "a.root", layout=flat_files.LAYOUT).read()
    write_events(one, tmp_path / "own.root")
    path = tmp_path / "c.toml"
    path.write_text('[samples.new]\nfiles = "own.root"\nhelicity = "LR"\n')
    source = open_events(path)
    assert [s.name for s in source.samples] == ["new"]
    assert source.samples[0].helicity is Helicity.LR
    assert np.all(source.read().id == one.id)
    two = open_events([tmp_path / "a.root", other], layout=flat_files.LAYOUT).read()
    write_events(two, tmp_path / "own.root")
    with pytest.raises(InputError, match=r"a file of one sample is required .* a, b"):
        open_events(path)
