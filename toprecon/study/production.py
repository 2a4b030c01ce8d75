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

import awkward as ak
import numpy as np
from numpy.typing import NDArray
from pydantic import field_validator

from toprecon.errors import InputError, OptionError, StudyError
from toprecon.events import concatenate_events, samples_of, with_samples
from toprecon.generation import GenerationOptions, generate
from toprecon.io import open_events, write_events
from toprecon.kinematics import mass, momentum
from toprecon.options import Options, option

Progress = Callable[[str, int, int], Any]

COMPONENTS = ("E", "px", "py", "pz")
NOT_ROUNDED = {"id", "weight", "sample", "helicity", "sqrt_s"}


class SampleRecipe(Options):
    """One sample of a production."""

    name: str = option(..., "name of the sample and of its file")
    events: int = option(..., "events generated", low=1)
    seed: int = option(1, "seed of the sample", low=0, high=2**32 - 1)
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
    for job, known in zip(jobs, finished, strict=True):
        if known is None and job.path.exists() and not replace:
            msg = (
                f"{job.path}: a new file is required, but this exists and is not what "
                "the recipe makes; choose another folder or allow replacing it "
                "(replace=True, --replace)"
            )
            raise StudyError(msg)
    return [
        known or _produce(job, part_size, progress, executor)
        for job, known in zip(jobs, finished, strict=True)
    ]


def content_checksum(events: ak.Array) -> str:
    """Return a hash of the content of events.

    Parameters
    ----------
    events : ak.Array
        Events.

    Returns
    -------
    str
        SHA-256 over all columns in alphabetical order: equal for equal content, however
        the events were made, stored or read.
    """
    whole = hashlib.sha256()
    for name, column in sorted(_columns(events).items()):
        whole.update(name.encode())
        flat = ak.to_numpy(ak.flatten(column, axis=None))
        if column.ndim > 1:
            whole.update(ak.to_numpy(ak.num(column, axis=1)).astype("<i8").tobytes())
        kind = "<u8" if flat.dtype == np.uint64 else "<f8"
        # one bit pattern for every NaN and for both zeros
        values = flat.astype(kind) + (0 if kind == "<u8" else 0.0)
        if kind == "<f8":
            values[np.isnan(values)] = np.nan
        whole.update(values.tobytes())
    return whole.hexdigest()


def rounded(events: ak.Array, bits: int) -> ak.Array:
    """Return events with floating-point numbers rounded to some bits of mantissa.

    Parameters
    ----------
    events : ak.Array
        Events.
    bits : int
        Bits kept, 8 to 52.

    Returns
    -------
    ak.Array
        Momenta keep their masses; weights and identities are untouched.
    """
    if bits >= 52:
        return events
    fields = {
        name: events[name]
        if name in NOT_ROUNDED
        else ak.transform(lambda layout, **_: _round_leaf(layout, bits), events[name])
        for name in events.fields
    }
    out = ak.Array(
        ak.contents.RecordArray(
            [x.layout for x in fields.values()], list(fields), length=len(events)
        )
    )
    return with_samples(out, samples_of(events))


def _round_leaf(layout: Any, bits: int) -> Any:
    """Round a column of floats, or momenta keeping their masses."""
    if isinstance(layout, ak.contents.RecordArray) and layout.parameter("__record__"):
        return _round_momenta(layout, bits)
    if not isinstance(layout, ak.contents.NumpyArray):
        return None
    data = np.asarray(layout.data)
    if data.dtype != np.float64:
        return layout
    return ak.contents.NumpyArray(_round(data, bits))


def _round_momenta(layout: Any, bits: int) -> Any:
    """Round the three-momentum; the energy follows from it and the mass."""
    columns = dict(zip(layout.fields, layout.contents, strict=True))
    p = np.stack([np.asarray(columns[c].data)[: len(layout)] for c in COMPONENTS])
    m = mass(p)
    p[1:] = _round(p[1:], bits)
    p[0] = _round(np.sqrt(m**2 + momentum(p) ** 2), max(bits, 23))
    new = dict(zip(COMPONENTS, p, strict=True))
    contents = [
        ak.contents.NumpyArray(new[name]) if name in new else _round_leaf(column, bits)
        for name, column in columns.items()
    ]
    return ak.contents.RecordArray(
        contents, list(columns), length=len(layout), parameters=layout.parameters
    )


def _round(values: NDArray[np.float64], bits: int) -> NDArray[np.float64]:
    """Round to some bits of mantissa."""
    mantissa, exponent = np.frexp(values)
    scale = float(2**bits)
    return np.asarray(np.ldexp(np.rint(mantissa * scale) / scale, exponent))


def _columns(events: ak.Array, prefix: str = "") -> dict[str, ak.Array]:
    """Columns of nested records by their path."""
    out: dict[str, ak.Array] = {}
    for name in events.fields:
        column = events[name]
        path = f"{prefix}{name}"
        if column.fields:
            out.update(_columns(column, f"{path}."))
        else:
            out[path] = column
    return out


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
