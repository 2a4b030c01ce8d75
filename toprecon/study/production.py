"""Production: samples generated in parts, to be stopped and continued at any time.

A recipe (TOML) lists samples with the settings of the generator. Every sample is made
in parts; a finished part is a file written by rename in a hidden folder beside the
result, so that a second run goes on where the first one stopped. The content of a
sample depends on its settings and seed only, not on the parts.
"""

from __future__ import annotations

import dataclasses
import hashlib
import json
import os
import shutil
import tomllib
from collections.abc import Callable, Sequence
from concurrent.futures import Executor
from pathlib import Path
from typing import Any

import tomli_w
from pydantic import field_validator

from toprecon.errors import InputError, OptionError, StudyError
from toprecon.events import concatenate_events
from toprecon.generation import GenerationOptions, generate
from toprecon.generation import describe as describe_sample
from toprecon.io import open_events, write_events
from toprecon.options import Options, option
from toprecon.study.storing import content_checksum, rounded, write_text

CATALOGUE_HEADER = """# Samples and their cross sections [fb], written with the events.
# Top pairs: tree level with radiation along the beams, times the branching fraction of
# the decays. Backgrounds: unpolarised cross section of the event generator; its
# division among the beam helicities is that of the tree level (quark pairs) or of
# arXiv:1307.8102 at 500 GeV, from memory (WW, ZZ), and the shape is taken to be the
# same for both helicities.

"""

Progress = Callable[[str, int, int], Any]


class SampleRecipe(Options):
    """One sample of a production."""

    name: str = option(..., "name of the sample and of its file")
    events: int = option(..., "events generated", low=1)
    seed: int = option(1, "seed of the sample", low=0, high=2**32 - 1)
    catalogue: str = option(
        "catalogue.toml", "catalogue that lists the sample; samples of one energy each"
    )
    options: GenerationOptions = option(
        None, "settings of the generator", factory=GenerationOptions
    )

    @field_validator("name")
    @classmethod
    def _file_name(cls, value: str) -> str:
        if not value or not all(c.isalnum() or c in "_-." for c in value):
            msg = f"must be letters, digits, '_', '-', '.'; got {value!r}"
            raise ValueError(msg)
        return value


class Recipe(Options):
    """A production: samples and the precision they are stored with."""

    samples: tuple[SampleRecipe, ...] = option(..., "what is generated")
    mantissa_bits: int = option(
        23,
        "bits kept of every stored number but weights; fewer make smaller files",
        low=8,
        high=52,
    )

    @field_validator("samples")
    @classmethod
    def _distinct(cls, value: tuple[SampleRecipe, ...]) -> tuple[SampleRecipe, ...]:
        if not value:
            msg = "at least one sample is required; got none"
            raise ValueError(msg)
        names = [sample.name for sample in value]
        twice = sorted({name for name in names if names.count(name) > 1})
        if twice:
            msg = f"every sample needs its own name; got {', '.join(twice)} twice"
            raise ValueError(msg)
        return value

    @classmethod
    def load(cls, path: str | os.PathLike[str]) -> Recipe:
        """Read a recipe from a TOML file.

        Parameters
        ----------
        path : path
            File with ``[[samples]]``; a table ``[options]`` holds generator settings
            common to all samples.

        Returns
        -------
        Recipe
            The recipe.

        Raises
        ------
        InputError
            If the file cannot be read.
        OptionError
            If it is not TOML, or a setting is unknown or out of range.
        """
        try:
            data = tomllib.loads(Path(path).read_text(encoding="utf-8"))
        except OSError as error:
            msg = f"{path}: a recipe (TOML) is required, but {str(error.strerror).lower()}"
            raise InputError(msg) from error
        except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
            msg = f"{path}: must be TOML; {error}"
            raise OptionError(msg) from error
        try:
            return cls(**_with_common_options(data))
        except OptionError as error:
            msg = f"{path}: {error}"
            raise OptionError(msg) from None


def _with_common_options(data: dict[str, Any]) -> dict[str, Any]:
    """Put the settings common to all samples into each of them."""
    common = data.pop("options", {})
    if not isinstance(common, dict):
        msg = f"options: must be a table of settings; got {common!r}"
        raise OptionError(msg)
    samples = data.get("samples")
    if not isinstance(samples, list):
        return data
    merged = [
        {**sample, "options": {**common, **sample.get("options", {})}}
        if isinstance(sample, dict) and isinstance(sample.get("options", {}), dict)
        else sample
        for sample in samples
    ]
    return {**data, "samples": merged}


@dataclasses.dataclass(frozen=True)
class Produced:
    """A finished sample.

    Parameters
    ----------
    name : str
        Of the sample.
    path : Path
        Its file.
    generated, stored : int
        Events generated, and those kept.
    checksum : str
        Of the content, see :func:`content_checksum`.
    """

    name: str
    path: Path
    generated: int
    stored: int
    checksum: str


def produce(
    recipe: Recipe,
    folder: str | os.PathLike[str],
    *,
    part_size: int = 2_000,
    replace: bool = False,
    progress: Progress | None = None,
    executor: Executor | None = None,
) -> list[Produced]:
    """Make all samples of a recipe.

    Parameters
    ----------
    recipe : Recipe
        What to make.
    folder : path
        Where the files go; samples that are there with the same settings are kept.
    part_size : int
        Events per part; it does not change the content.
    replace : bool
        Whether files of the same names, but other settings or content, may be
        replaced.
    progress : callable, optional
        Called with (sample, events done, events in all).
    executor : concurrent.futures.Executor, optional
        Makes several parts at once.

    Returns
    -------
    list of Produced
        In the order of the recipe.

    Raises
    ------
    StudyError
        If the folder is a file, or holds a file that may not be replaced.
    OptionError
        If the part size is not positive.
    """
    if part_size < 1:
        msg = f"part_size: must be >= 1; got {part_size}"
        raise OptionError(msg)
    target = Path(folder)
    if target.exists() and not target.is_dir():
        msg = f"{target}: a folder is required, but this is a file"
        raise StudyError(msg)
    target.mkdir(parents=True, exist_ok=True)
    jobs = [_Job(sample, recipe.mantissa_bits, target) for sample in recipe.samples]
    finished = [job.finished() for job in jobs]
    foreign = [
        job.path
        for job, known in zip(jobs, finished, strict=True)
        if known is None and job.path.exists()
    ]
    foreign += [
        target / name
        for name in sorted({sample.catalogue for sample in recipe.samples})
        if not _is_ours(target / name)
    ]
    if foreign and not replace:
        msg = (
            f"{foreign[0]}: a new file is required, but this exists and is not known "
            "to be what the recipe makes; choose another folder or allow replacing it "
            "(replace=True, --replace)"
        )
        raise StudyError(msg)
    made = [
        known or _produce(job, part_size, progress, executor)
        for job, known in zip(jobs, finished, strict=True)
    ]
    _write_catalogues(recipe, made, target)
    return made


def _is_ours(catalogue: Path) -> bool:
    """Whether a catalogue is absent, or written here before."""
    if not catalogue.exists():
        return True
    return catalogue.read_bytes().startswith(CATALOGUE_HEADER.encode())


def _write_catalogues(recipe: Recipe, made: list[Produced], folder: Path) -> None:
    """List the samples with their cross sections, one file per catalogue named."""
    catalogues: dict[str, dict[str, Any]] = {}
    for sample, produced in zip(recipe.samples, made, strict=True):
        options = sample.options.replace(name=sample.name)
        row = describe_sample(options, sample.events).to_mapping()
        pure = {"LR": "cross_section_lr", "RL": "cross_section_rl"}
        sections = ("cross_section", "cross_section_lr", "cross_section_rl")
        only = pure.get(row["helicity"])
        kept = (
            *("process", "helicity", "sqrt_s", "generated"),
            *(name for name in sections if only in {None, name}),
        )
        entry = {"files": [produced.path.name], **{k: row[k] for k in kept if k in row}}
        catalogues.setdefault(sample.catalogue, {})[sample.name] = entry
    for name, samples in catalogues.items():
        text = CATALOGUE_HEADER + tomli_w.dumps({"samples": samples})
        write_text(folder / name, text)


@dataclasses.dataclass(frozen=True)
class _Job:
    """One sample, and where its file and parts are."""

    sample: SampleRecipe
    bits: int
    folder: Path

    @property
    def path(self) -> Path:
        return self.folder / f"{self.sample.name}.root"

    @property
    def parts(self) -> Path:
        settings = {**self.sample.to_mapping(), "mantissa_bits": self.bits}
        text = json.dumps(settings, sort_keys=True)
        key = hashlib.sha256(text.encode()).hexdigest()
        return self.folder / ".parts" / f"{self.sample.name}-{key[:16]}"

    @property
    def record(self) -> Path:
        return self.parts.with_name(f"{self.parts.name}.json")

    def finished(self) -> Produced | None:
        """Return the finished sample, if its file is still the one that was made."""
        try:
            known = json.loads(self.record.read_text(encoding="utf-8"))
            if known.pop("file") != _hash_of(self.path):
                return None
            return Produced(**{**known, "path": self.path})
        except (OSError, ValueError, KeyError, TypeError):
            return None


def _hash_of(path: Path) -> str:
    """Hash of the bytes of a file."""
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def _produce(
    job: _Job, part_size: int, progress: Progress | None, executor: Executor | None
) -> Produced:
    """Make one sample."""
    total = job.sample.events
    ranges: Sequence[tuple[int, int]] = [
        (start, min(part_size, total - start)) for start in range(0, total, part_size)
    ]
    job.parts.mkdir(parents=True, exist_ok=True)
    arguments = [(job, *one) for one in ranges]
    results = (
        map(_part, arguments) if executor is None else executor.map(_part, arguments)
    )
    files = []
    for (start, n), file in zip(ranges, results, strict=True):
        files.append(file)
        if progress is not None:
            progress(job.sample.name, start + n, total)
    return _join(job, files)


def _part(arguments: tuple[_Job, int, int]) -> Path:
    """Make one part, or find it finished."""
    job, start, n = arguments
    path = job.parts / f"{start:012d}-{n}.root"
    if not path.exists():
        options = job.sample.options.replace(name=job.sample.name)
        events = generate(n, options, seed=job.sample.seed, start=start)
        write_events(rounded(events, job.bits), path)
    return path


def _join(job: _Job, files: list[Path]) -> Produced:
    """Put the parts into one file; the record is there before the file is."""
    events = concatenate_events([open_events(file).read() for file in files])
    whole = write_events(events, job.parts / "whole.root")
    produced = Produced(
        job.sample.name,
        job.path,
        job.sample.events,
        len(events),
        content_checksum(events),
    )
    record = {
        **dataclasses.asdict(produced),
        "path": job.path.name,
        "file": _hash_of(whole),
    }
    job.record.write_text(json.dumps(record), encoding="utf-8")
    whole.replace(job.path)
    shutil.rmtree(job.parts)
    return produced
