"""Samples from a recipe: the same content however they are made, never lost."""

from __future__ import annotations

import json
from concurrent.futures import ProcessPoolExecutor

import awkward as ak
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from toprecon.errors import InputError, OptionError, StudyError
from toprecon.events import samples_of, with_samples
from toprecon.kinematics import mass
from toprecon.study import Recipe, content_checksum, open_events, produce, production
from toprecon.study.storing import rounded

TEXT = """
mantissa_bits = 16

[options]
sqrt_s = 500.0

[[samples]]
name = "left"
events = 130
seed = 3
options = { helicity = "LR" }

[[samples]]
name = "right"
events = 70
options = { helicity = "RL", sqrt_s = 600.0 }
"""


@pytest.fixture
def recipe(tmp_path):
    path = tmp_path / "recipe.toml"
    path.write_text(TEXT)
    return Recipe.load(path)


@pytest.fixture
def counted(monkeypatch):
    """Ranges of events that are really generated."""
    made = []
    original = production.generate

    def generate(n, options, *, seed, start):
        made.append((options.name, start, n))
        return original(n, options, seed=seed, start=start)

    monkeypatch.setattr(production, "generate", generate)
    return made


def _checksums(samples):
    return [sample.checksum for sample in samples]


def test_common_settings_hold_unless_a_sample_says_otherwise(recipe):
    left, right = recipe.samples
    assert (left.options.sqrt_s, right.options.sqrt_s) == (500.0, 600.0)
    assert (left.seed, right.seed) == (3, 1)


def test_files_are_complete_and_described(recipe, tmp_path):
    made = produce(recipe, tmp_path / "out", part_size=40)
    assert [p.name for p in made] == ["left", "right"]
    for sample, n in zip(made, (130, 70), strict=True):
        source = open_events(sample.path)
        (known,) = source.samples
        assert known.name == sample.name
        assert known.generated == known.entries == known.normalisation == n
        assert sample.generated == sample.stored == source.entries == n
        assert content_checksum(source.read()) == sample.checksum
    visible = {p.name for p in (tmp_path / "out").iterdir() if p.name[0] != "."}
    assert visible == {"left.root", "right.root", "catalogue.toml"}


def test_catalogue_beside_the_samples_can_be_opened_and_weighted(recipe, tmp_path):
    made = produce(recipe, tmp_path, part_size=100)
    source = open_events(tmp_path / "catalogue.toml")
    assert [sample.name for sample in source.samples] == ["left", "right"]
    for sample, known in zip(source.samples, made, strict=True):
        (alone,) = open_events(known.path).samples
        section = "cross_section_lr" if alone.helicity < 0 else "cross_section_rl"
        assert getattr(sample, section) == getattr(alone, section) > 0
        assert sample.normalisation == known.generated


@pytest.mark.parametrize("size", [1_000, 130, 64, 33])
def test_content_does_not_depend_on_the_parts(size, recipe, tmp_path):
    one = produce(recipe, tmp_path / "one", part_size=17)
    other = produce(recipe, tmp_path / "other", part_size=size)
    assert _checksums(one) == _checksums(other)
    assert one[0].checksum != one[1].checksum


def test_content_is_the_same_in_processes(recipe, tmp_path):
    serial = produce(recipe, tmp_path / "one", part_size=50)
    with ProcessPoolExecutor(2) as executor:
        many = produce(recipe, tmp_path / "two", part_size=50, executor=executor)
    assert _checksums(serial) == _checksums(many)


def test_a_finished_sample_is_kept(recipe, counted, tmp_path):
    first = produce(recipe, tmp_path, part_size=50)
    counted.clear()
    before = (tmp_path / "left.root").stat().st_mtime_ns
    assert produce(recipe, tmp_path, part_size=20) == first
    assert counted == []
    assert (tmp_path / "left.root").stat().st_mtime_ns == before


def test_a_deleted_file_is_made_again(recipe, counted, tmp_path):
    first = produce(recipe, tmp_path, part_size=50)
    counted.clear()
    (tmp_path / "right.root").unlink()
    assert _checksums(produce(recipe, tmp_path, part_size=50)) == _checksums(first)
    assert {name for name, *_ in counted} == {"right"}


def test_an_interrupted_production_goes_on(recipe, tmp_path, monkeypatch):
    whole = produce(recipe, tmp_path / "whole")
    original, made = production.generate, []

    def generate(n, options, *, seed, start):
        made.append(start)
        if len(made) == 3:
            raise KeyboardInterrupt
        return original(n, options, seed=seed, start=start)

    monkeypatch.setattr(production, "generate", generate)
    with pytest.raises(KeyboardInterrupt):
        produce(recipe, tmp_path / "out", part_size=40)
    assert not (tmp_path / "out" / "left.root").exists()
    again = produce(recipe, tmp_path / "out", part_size=40)
    assert made == [0, 40, 80, 80, 120, 0, 40]
    assert _checksums(again) == _checksums(whole)


def test_a_changed_file_is_not_taken_for_finished_nor_replaced(
    recipe, counted, tmp_path
):
    first = produce(recipe, tmp_path, part_size=50)
    path = tmp_path / "left.root"
    path.write_bytes(path.read_bytes()[:-10])
    counted.clear()
    with pytest.raises(
        StudyError, match=r"left.root: a new file is required, but this exists and is"
    ):
        produce(recipe, tmp_path)
    assert counted == []
    again = produce(recipe, tmp_path, replace=True)
    assert _checksums(again) == _checksums(first)


def test_a_file_made_otherwise_is_not_replaced_unless_asked(recipe, counted, tmp_path):
    produce(recipe, tmp_path)
    before = (tmp_path / "right.root").read_bytes()
    counted.clear()
    right = recipe.samples[1].replace(seed=9)
    changed = recipe.replace(samples=(recipe.samples[0], right))
    with pytest.raises(StudyError, match=r"choose another folder or allow replacing"):
        produce(changed, tmp_path)
    assert counted == []  # refused before anything is made
    assert (tmp_path / "right.root").read_bytes() == before
    produce(changed, tmp_path, replace=True)
    assert {name for name, *_ in counted} == {"right"}


def test_somebodys_own_catalogue_is_not_replaced_unless_asked(recipe, tmp_path):
    mine = tmp_path / "catalogue.toml"
    mine.write_text("# my own\n")
    with pytest.raises(
        StudyError, match=r"catalogue.toml: a new file is required, but"
    ):
        produce(recipe, tmp_path)
    assert mine.read_text() == "# my own\n"
    assert not (tmp_path / "left.root").exists()
    produce(recipe, tmp_path, replace=True)
    assert "left" in mine.read_text()
    produce(recipe, tmp_path)


def test_progress_is_told_per_sample(recipe, tmp_path):
    seen = []
    produce(recipe, tmp_path, part_size=60, progress=lambda *x: seen.append(x))
    assert seen == [
        ("left", 60, 130),
        ("left", 120, 130),
        ("left", 130, 130),
        ("right", 60, 70),
        ("right", 70, 70),
    ]


def test_a_file_is_no_folder(recipe, tmp_path):
    (tmp_path / "x").write_text("")
    with pytest.raises(StudyError, match="x: a folder is required, but this is a file"):
        produce(recipe, tmp_path / "x")


def test_parts_have_at_least_one_event(recipe, tmp_path):
    with pytest.raises(OptionError, match="part_size: must be >= 1; got 0"):
        produce(recipe, tmp_path, part_size=0)


SAMPLE = '[[samples]]\nname = "a"\nevents = 5\n'


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "samples: required, but not given"),
        ("samples = []", "samples: at least one sample is required; got none"),
        ("samples = 3", "samples: must be a list; got 3"),
        ("samples = [3]", "samples.0: must be a table of settings; got 3"),
        ("options = 3\n" + SAMPLE, "options: must be a table of settings; got 3"),
        (SAMPLE + "options = 3", "samples.0.options: must be a table of settings"),
        (SAMPLE + SAMPLE, "samples: every sample needs its own name; got a twice"),
        ('[[samples]]\nname = "a"', "samples.0.events: required, but not given"),
        (SAMPLE + "evnts = 3", "samples.0.evnts: unknown option; did you mean 'event"),
        (
            '[[samples]]\nname = "../a"\nevents = 1',
            r"samples.0.name: must be letters, digits, '_', '-', '.'; got '../a'",
        ),
        (
            '[[samples]]\nname = "a"\nevents = 0',
            "samples.0.events: must be >= 1; got 0",
        ),
        (
            "[options]\nsqrt_x = 3\n" + SAMPLE,
            "samples.0.options.sqrt_x: unknown option; did you mean 'sqrt_s'?",
        ),
        ("mantissa_bits = 3\n" + SAMPLE, "mantissa_bits: must be >= 8; got 3"),
        ("[[samples", "must be TOML"),
    ],
)
def test_a_wrong_recipe_is_one_sentence(text, message, tmp_path):
    path = tmp_path / "recipe.toml"
    path.write_text(text)
    with pytest.raises(OptionError) as caught:
        Recipe.load(path)
    assert str(caught.value).startswith(f"{path}: {message}")
    assert "\n" not in str(caught.value)


def test_a_missing_recipe_is_one_sentence(tmp_path):
    with pytest.raises(
        InputError, match=r"none: a recipe \(TOML\) is required, but no"
    ):
        Recipe.load(tmp_path / "none")


def test_the_checksum_sees_every_column_and_nothing_else(recipe, tmp_path):
    (sample, _) = produce(recipe, tmp_path)
    events = open_events(sample.path).read()
    (description,) = samples_of(events)
    renamed = with_samples(events, (description.replace(name="other"),))
    assert content_checksum(renamed) == sample.checksum
    for column in ("weight", "id", "sqrt_s"):
        changed = ak.to_numpy(events[column]).copy()
        changed[7] += 1
        assert content_checksum(ak.with_field(events, changed, column)) != (
            sample.checksum
        )
    assert content_checksum(events[::-1]) != sample.checksum
    assert content_checksum(events[:-1]) != sample.checksum
    fewer = ak.with_field(events, events.jets[:, 1:], "jets")
    assert content_checksum(fewer) != sample.checksum


def test_the_checksum_knows_one_nan_and_one_zero():
    first = ak.Array({"a": np.array([0.0, np.nan])})
    second = ak.Array({"a": np.array([-0.0, -np.nan])})
    assert content_checksum(first) == content_checksum(second)


@given(st.integers(8, 52))
def test_rounding_is_as_fine_as_asked_and_keeps_masses(bits):
    from toprecon.generation import generate

    events = generate(20, seed=1)
    coarse = rounded(events, bits)
    for component in ("px", "py", "pz"):
        before, after = (
            ak.to_numpy(ak.flatten(e.jets[component])) for e in (events, coarse)
        )
        assert np.all(np.abs(after - before) <= 2.0**-bits * np.abs(before))
    for name in ("weight", "id"):
        assert np.array_equal(events[name], coarse[name])
    p = [
        np.array([ak.to_numpy(e.truth.top[c]) for c in ("E", "px", "py", "pz")])
        for e in (events, coarse)
    ]
    assert np.allclose(mass(p[0]), mass(p[1]), rtol=1e-4)  # energies keep 23 bits


def test_records_of_finished_samples_can_be_lost(recipe, tmp_path):
    first = produce(recipe, tmp_path)
    for record in (tmp_path / ".parts").glob("*.json"):
        record.write_text("damaged")
    with pytest.raises(StudyError, match="is not known to be what the recipe"):
        produce(recipe, tmp_path)
    again = produce(recipe, tmp_path, replace=True)
    assert _checksums(again) == _checksums(first)
    data = json.loads(next((tmp_path / ".parts").glob("left*.json")).read_text())
    assert data["checksum"] == first[0].checksum


def test_the_committed_samples_are_those_of_their_recipe(sample_folder):
    recipe = Recipe.load(sample_folder / "recipe.toml")
    names = {sample.name for sample in recipe.samples}
    assert {p.stem for p in sample_folder.glob("*.root")} == names
    for sample in recipe.samples:
        (known,) = open_events(sample_folder / f"{sample.name}.root").samples
        assert known.name == sample.name
        assert known.generated == sample.events
        assert known.sqrt_s == sample.options.sqrt_s
        assert known.helicity is sample.options.helicity
        assert known.normalisation == sample.events
