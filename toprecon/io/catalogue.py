"""Samples and their files: what is known beyond the files themselves.

::

    layout = "showered.toml"

    [samples.signal_LR]
    files = ["signal_LR_*.root"]
    process = "ttbar"
    helicity = "LR"
    sqrt_s = 500.0
    cross_section = 1523.0
    generated = 100000

Paths are relative to the catalogue.
"""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any, Self

import tomli_w
from pydantic import PrivateAttr, field_validator, model_validator

from toprecon.errors import InputError, OptionError
from toprecon.events import SIGNAL_PROCESS, Helicity, Sample
from toprecon.io.layout import FileLayout, load_layout, read_toml
from toprecon.io.opening import expand
from toprecon.io.scanning import Request
from toprecon.options import Options, option


class CatalogueSample(Options):
    """One sample of a catalogue."""

    files: tuple[str, ...] = option(..., "files, patterns, file:tree or URLs")
    layout: str = option("", "file layout in TOML; empty for that of the catalogue")
    process: str = option(SIGNAL_PROCESS, "'ttbar' is the signal")
    helicity: str = option("MIXED", "LR, RL or MIXED beams")
    sqrt_s: float | None = option(None, "nominal energy", unit="GeV", above=0.0)
    cross_section: float | None = option(
        None, "cross section as generated", unit="fb", low=0.0
    )
    cross_section_lr: float | None = option(
        None, "cross section of pure e-L e+R beams", unit="fb", low=0.0
    )
    cross_section_rl: float | None = option(
        None, "cross section of pure e-R e+L beams", unit="fb", low=0.0
    )
    electron_polarisation: float = option(
        0.0, "of a MIXED sample; > 0 is right-handed", low=-1.0, high=1.0
    )
    positron_polarisation: float = option(
        0.0, "of a MIXED sample; > 0 is right-handed", low=-1.0, high=1.0
    )
    generated: int | None = option(
        None, "events generated, before anything was dropped", low=0
    )
    sum_of_weights: float | None = option(
        None, "sum of generator weights of the events generated"
    )

    @field_validator("files", mode="before")
    @classmethod
    def _one_or_several(cls, value: Any) -> Any:
        return (value,) if isinstance(value, str) else value

    @field_validator("files")
    @classmethod
    def _some(cls, value: tuple[str, ...]) -> tuple[str, ...]:
        if not value:
            msg = "at least one file is required; got none"
            raise ValueError(msg)
        return value

    @field_validator("helicity")
    @classmethod
    def _known_helicity(cls, value: str) -> str:
        if value not in Helicity.__members__:
            msg = f"must be LR, RL or MIXED; got {value!r}"
            raise ValueError(msg)
        return value

    @model_validator(mode="after")
    def _fits_helicity(self) -> Self:
        other = {"LR": "cross_section_rl", "RL": "cross_section_lr"}.get(self.helicity)
        if other and getattr(self, other) is not None:
            msg = (
                f"{other} is stated for a sample of {self.helicity} beams; leave it out"
            )
            raise ValueError(msg)
        if other and (self.electron_polarisation or self.positron_polarisation):
            msg = (
                f"polarisations are stated for a sample of pure {self.helicity} beams; "
                "leave them out, or set helicity = 'MIXED'"
            )
            raise ValueError(msg)
        return self

    def to_sample(self, name: str) -> tuple[Sample, frozenset[str]]:
        """Return the description of the sample, and what of it was stated.

        Parameters
        ----------
        name : str
            Name of the sample.

        Returns
        -------
        Sample
            Without entries.
        frozenset of str
            Fields that a file may not contradict.
        """
        data: dict[str, Any] = {
            key: getattr(self, key)
            for key in (
                "process",
                "sqrt_s",
                "cross_section",
                "cross_section_lr",
                "cross_section_rl",
                "electron_polarisation",
                "positron_polarisation",
                "generated",
            )
            if getattr(self, key) is not None
        }
        data["helicity"] = Helicity[self.helicity]
        if self.helicity != "MIXED" and "cross_section" in data:
            data[f"cross_section_{self.helicity.lower()}"] = data.pop("cross_section")
        if self.sum_of_weights is not None:
            data["stated_sum_of_weights"] = self.sum_of_weights
        sample = Sample(name, **data)
        given = {"name", "process"} | (data.keys() - {"helicity"})
        if "helicity" in self.model_fields_set:
            given.add("helicity")
        return sample, frozenset(given)


class Catalogue(Options):
    """Samples by name."""

    layout: str = option("", "file layout in TOML, for samples that name none")
    samples: dict[str, CatalogueSample] = option(..., "samples by name")
    _folder: Path = PrivateAttr(default=Path())

    @field_validator("samples")
    @classmethod
    def _some(cls, value: dict[str, CatalogueSample]) -> dict[str, CatalogueSample]:
        if not value:
            msg = "at least one sample is required; got none"
            raise ValueError(msg)
        return value

    @property
    def folder(self) -> Path:
        """Folder that relative paths start from."""
        return self._folder

    def requests(self) -> list[Request]:
        """Return the files of all samples with what is known of them.

        Returns
        -------
        list of Request
            In the order of the catalogue.

        Raises
        ------
        InputError
            If a pattern fits no file.
        """
        layouts: dict[str, FileLayout | None] = {"": None}
        out = []
        for name, entry in self.samples.items():
            path = entry.layout or self.layout
            if path not in layouts:
                layouts[path] = load_layout(self.folder / path)
            sample, given = entry.to_sample(name)
            try:
                files = expand(entry.files, self.folder)
            except InputError as error:
                msg = f"sample {name!r}: {error}"
                raise InputError(msg) from None
            out += [
                Request(file, tree, layouts[path], sample, given)
                for file, tree in files
            ]
        return out

    def save(self, path: str | os.PathLike[str]) -> Path:
        """Write the catalogue to a TOML file and return its path."""
        target = Path(path)
        data = self.model_dump(mode="json", exclude_none=True, exclude_defaults=True)
        target.write_text(tomli_w.dumps(data), encoding="utf-8")
        return target


def load_catalogue(path: str | os.PathLike[str]) -> Catalogue:
    """Read a catalogue.

    Parameters
    ----------
    path : path
        TOML file.

    Returns
    -------
    Catalogue
        Its relative paths start from the folder of the file.

    Raises
    ------
    InputError
        If the file is missing or not TOML.
    OptionError
        If it is not a catalogue; the message names the key.
    """
    source = Path(path)
    try:
        catalogue = Catalogue(**read_toml(source, what="a catalogue of samples"))
    except OptionError as error:
        msg = f"{source}: {error}"
        raise OptionError(msg) from None
    catalogue._folder = source.parent
    return catalogue


def as_catalogue(catalogue: Catalogue | str | os.PathLike[str]) -> Catalogue:
    """Return a catalogue given as such or as a path."""
    return catalogue if isinstance(catalogue, Catalogue) else load_catalogue(catalogue)
