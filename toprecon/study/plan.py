"""The study plan: every setting that changes a number, as plain, validated data.

A plan is a tree of settings saved as TOML. Files, folders and numbers of workers are
arguments, not settings. The sections up to ``[angle]`` decide what is reconstructed;
their hash names the event table. The rest is applied to the table, at every move of
a control.
"""

from __future__ import annotations

import hashlib
import json
import math
import os
import tomllib
from collections.abc import Iterable
from enum import StrEnum
from pathlib import Path
from typing import Any, Self

import tomli_w
from pydantic import field_validator, model_validator

from toprecon.asymmetry import EstimatorOptions
from toprecon.boosted import OBSERVABLES as BOOSTED_OBSERVABLES
from toprecon.boosted import BoostedOptions
from toprecon.errors import InputError, OptionError, nearest
from toprecon.events import Channel, Observable, find_observable
from toprecon.migration import MigrationOptions
from toprecon.options import Options, option
from toprecon.pairing import FIT_OBSERVABLES, FitOptions, PairingOptions
from toprecon.pairing import OBSERVABLES as PAIRING_OBSERVABLES
from toprecon.selection import OBSERVABLES as SELECTION_OBSERVABLES
from toprecon.selection import SelectionOptions
from toprecon.truth import TruthOptions

PLAN_VERSION = 1


class BranchChoice(StrEnum):
    """Which reconstruction is used."""

    RESOLVED = "resolved"
    BOOSTED = "boosted"
    PER_EVENT = "per event"


class Direction(StrEnum):
    """Which reconstructed direction stands for the top."""

    HADRONIC = "hadronic"
    LEPTONIC = "leptonic"
    DIFFERENCE = "difference"


class Frame(StrEnum):
    """Frame in which the angle is measured."""

    LAB = "lab"
    PAIR = "pair"


class StudyOptions(Options):
    """Name and kind of the study."""

    name: str = option("study", "name, used in titles and files")
    channel: Channel = option(Channel.LEPTON_JETS, "decay channel reconstructed")
    branch: BranchChoice = option(
        BranchChoice.RESOLVED,
        "jets are paired ('resolved'), tops are fat jets ('boosted'), or 'per event': "
        "boosted where the fat jet of every hadronic top is tagged, else resolved",
    )
    version: int = option(PLAN_VERSION, "version of the plan's form")

    @field_validator("version")
    @classmethod
    def _known_version(cls, value: int) -> int:
        if value != PLAN_VERSION:
            msg = f"must be {PLAN_VERSION}, the version this program knows; got {value}"
            raise ValueError(msg)
        return value


class AngleOptions(Options):
    """How the production angle is measured."""

    direction: Direction = option(
        Direction.HADRONIC,
        "candidate whose direction is used; both candidates ('difference') if both "
        "sides are hadronic",
    )
    frame: Frame = option(Frame.LAB, "frame of the angle, generated and reconstructed")


class BeamsOptions(Options):
    """Beams and luminosity of the expected data."""

    electron_polarisation: float = option(
        0.0, "polarisation of the electron beam, > 0 right-handed", low=-1, high=1
    )
    positron_polarisation: float = option(
        0.0, "polarisation of the positron beam, > 0 right-handed", low=-1, high=1
    )
    luminosity: float = option(
        0.0, "integrated luminosity; 0 means not stated", unit="fb^-1", low=0
    )
    electron_polarisation_error: float = option(
        0.0, "error of the polarisation of the electron beam", low=0, high=1
    )
    positron_polarisation_error: float = option(
        0.0, "error of the polarisation of the positron beam", low=0, high=1
    )


class CutOptions(Options):
    """One cut on an observable of the event table."""

    observable: str = option(..., "name of the observable, such as pairing.chi2")
    low: float | None = option(None, "lowest value kept (inclusive); none if absent")
    high: float | None = option(None, "first value dropped (exclusive); none if absent")
    on: bool = option(True, "whether the cut is applied")

    @model_validator(mode="after")
    def _ordered(self) -> Self:
        if self.low is not None and self.high is not None and self.low > self.high:
            msg = f"low must not be above high; got low={self.low}, high={self.high}"
            raise ValueError(msg)
        return self

    @property
    def label(self) -> str:
        """Text for a cut flow, such as ``0 <= pairing.chi2 < 15``."""
        low = "" if self.low is None else f"{self.low:g} <= "
        high = "" if self.high is None else f" < {self.high:g}"
        return f"{low}{self.observable}{high}"


class StudyPlan(Options):
    """Every setting of a study.

    Read from TOML with :meth:`load` or :meth:`from_toml`, written with :meth:`save`;
    both ways give an equal plan.
    """

    study: StudyOptions = option(None, "name and kind", factory=StudyOptions)
    selection: SelectionOptions = option(
        None, "which events are reconstructed", factory=SelectionOptions
    )
    pairing: PairingOptions = option(
        None, "how jets are paired", factory=PairingOptions
    )
    fit: FitOptions = option(
        None, "constrained fit of the paired jets", factory=FitOptions
    )
    boosted: BoostedOptions = option(
        None, "how tops are found as fat jets", factory=BoostedOptions
    )
    truth: TruthOptions = option(
        None, "when an event counts as matched and as signal", factory=TruthOptions
    )
    angle: AngleOptions = option(None, "angle measured", factory=AngleOptions)
    beams: BeamsOptions = option(None, "beams and luminosity", factory=BeamsOptions)
    cuts: tuple[CutOptions, ...] = option((), "cuts on the event table, in order")
    asymmetry: EstimatorOptions = option(
        None, "estimators of A_FB beside counting everything", factory=EstimatorOptions
    )
    migration: MigrationOptions = option(
        None, "bins of the migration matrix", factory=MigrationOptions
    )

    @model_validator(mode="after")
    def _known_observables(self) -> Self:
        for position, cut in enumerate(self.cuts):
            find_observable(
                cut.observable, OBSERVABLES, where=f"cuts.{position}.observable"
            )
        return self

    @classmethod
    def from_toml(cls, text: str, *, where: str = "plan") -> Self:
        """Read a plan from TOML text.

        Parameters
        ----------
        text : str
            TOML.
        where : str
            Start of the message, usually the file name.

        Returns
        -------
        StudyPlan
            Settings that the text leaves out have their defaults.

        Raises
        ------
        OptionError
            If it is not TOML, or a setting is unknown or out of range.
        """
        try:
            return cls(**tomllib.loads(text))
        except tomllib.TOMLDecodeError as error:
            msg = f"{where}: must be TOML; {error}"
            raise OptionError(msg) from error
        except OptionError as error:
            msg = f"{where}: {error}"
            raise OptionError(msg) from None

    @classmethod
    def load(cls, path: str | os.PathLike[str]) -> Self:
        """Read a plan from a TOML file.

        Parameters
        ----------
        path : path
            File written by hand or by :meth:`save`.

        Returns
        -------
        StudyPlan
            Settings that the file leaves out have their defaults.

        Raises
        ------
        InputError
            If the file cannot be read.
        """
        try:
            text = Path(path).read_text(encoding="utf-8")
        except (OSError, UnicodeDecodeError) as error:
            reason = getattr(error, "strerror", None) or "not a text file"
            msg = f"{path}: a study plan (TOML) is required, but {reason.lower()}"
            raise InputError(msg) from error
        return cls.from_toml(text, where=str(path))

    def to_toml(self) -> str:
        """Return the plan as TOML text, every setting written out."""
        return tomli_w.dumps(self.to_mapping())

    def save(self, path: str | os.PathLike[str]) -> Path:
        """Write the plan to a TOML file, complete or not at all.

        Parameters
        ----------
        path : path
            File to write; replaced if it exists.

        Returns
        -------
        Path
            The file written.
        """
        target = Path(path)
        target.parent.mkdir(parents=True, exist_ok=True)
        partial = target.with_name(f".{target.name}.{os.getpid()}.part")
        partial.write_text(self.to_toml(), encoding="utf-8")
        partial.replace(target)
        return target

    def with_settings(self, settings: dict[str, Any]) -> Self:
        """Return the plan with some settings replaced.

        Parameters
        ----------
        settings : dict
            New values by path, such as ``{"pairing.cap": 6}``. Text is read as a TOML
            value where it is one, so that ``"6"`` is a number.

        Returns
        -------
        StudyPlan
            A new, validated plan.

        Raises
        ------
        OptionError
            If a path or value is wrong.
        """
        data = self.to_mapping()
        for path, value in settings.items():
            _put(data, path, _toml_value(value) if isinstance(value, str) else value)
        return type(self)(**data)

    def with_cut(
        self,
        observable: str,
        low: float | None = None,
        high: float | None = None,
        *,
        on: bool = True,
    ) -> Self:
        """Return the plan with the cut on one observable set or replaced.

        Parameters
        ----------
        observable : str
            Name, such as ``pairing.chi2``.
        low, high : float, optional
            Lowest value kept and first value dropped.
        on : bool
            Whether it is applied.

        Returns
        -------
        StudyPlan
            The cut keeps its place, or is added at the end.
        """
        low = None if low is not None and math.isinf(low) else low
        high = None if high is not None and math.isinf(high) else high
        new = CutOptions(observable=observable, low=low, high=high, on=on)
        names = [cut.observable for cut in self.cuts]
        cuts = list(self.cuts)
        if observable in names:
            cuts[names.index(observable)] = new
        else:
            cuts.append(new)
        return self.replace(cuts=tuple(cuts))

    def with_cuts(self, cuts: Iterable[tuple[str, float | None, float | None]]) -> Self:
        """Return the plan with several cuts set or replaced, such as those of a scan.

        Parameters
        ----------
        cuts : iterable of tuple
            (observable, low, high), as :meth:`with_cut` takes them.

        Returns
        -------
        StudyPlan
            A new plan.
        """
        plan = self
        for observable, low, high in cuts:
            plan = plan.with_cut(observable, low, high)
        return plan

    def as_code(self) -> str:
        """Return a Python expression that makes this plan from the default one."""
        text = "StudyPlan()"
        changed = _changes(type(self)().to_mapping(), self.to_mapping())
        cuts = changed.pop("cuts", None)
        if changed:
            lines = "".join(f"    {k!r}: {v!r},\n" for k, v in changed.items())
            text += f".with_settings({{\n{lines}}})"
        for cut in self.cuts if cuts is not None else ():
            limits = "".join(
                f", {name}={value:g}"
                for name, value in (("low", cut.low), ("high", cut.high))
                if value is not None
            )
            off = "" if cut.on else ", on=False"
            text += f".with_cut({cut.observable!r}{limits}{off})"
        return text

    @property
    def active_cuts(self) -> tuple[CutOptions, ...]:
        """Cuts that are switched on."""
        return tuple(cut for cut in self.cuts if cut.on)

    @property
    def reconstruct_settings(self) -> dict[str, Any]:
        """Settings that decide the content of the event table."""
        data = self.to_mapping()
        del data["study"]["name"]
        return {name: data[name] for name in RECONSTRUCT_SECTIONS}

    @property
    def reconstruct_hash(self) -> str:
        """Hash of the settings that decide the content of the event table."""
        return _hash(self.reconstruct_settings)

    @property
    def hash(self) -> str:
        """Hash of all settings."""
        return _hash(self.to_mapping())


RECONSTRUCT_SECTIONS = (
    "study",
    "selection",
    "pairing",
    "fit",
    "boosted",
    "truth",
    "angle",
)

OBSERVABLES: tuple[Observable, ...] = (
    *SELECTION_OBSERVABLES,
    *PAIRING_OBSERVABLES,
    *FIT_OBSERVABLES,
    *BOOSTED_OBSERVABLES,
)
"""Every observable a cut can use."""


def _hash(data: dict[str, Any]) -> str:
    """Hash of plain data, independent of the order of keys."""
    return hashlib.sha256(json.dumps(data, sort_keys=True).encode()).hexdigest()


def _changes(old: Any, new: Any, path: str = "") -> dict[str, Any]:
    """Find the settings, by path, that differ from the old ones."""
    if old == new:
        return {}
    inside = f"{path}." if path else ""
    if isinstance(old, dict) and isinstance(new, dict) and set(old) <= set(new):
        out: dict[str, Any] = {}
        for key in new:
            out.update(_changes(old.get(key), new[key], f"{inside}{key}"))
        return out
    if isinstance(old, list) and isinstance(new, list) and 0 < len(old) == len(new):
        out = {}
        for index, (a, b) in enumerate(zip(old, new, strict=True)):
            out.update(_changes(a, b, f"{inside}{index}"))
        return out
    return {path: new}


def _toml_value(text: str) -> Any:
    """Read text as a TOML value; plain words stay text."""
    try:
        return tomllib.loads(f"value = {text}")["value"]
    except tomllib.TOMLDecodeError:
        return text


def _put(data: Any, path: str, value: Any) -> None:
    """Set a value by its dotted path; numbers in the path index lists."""
    parts = path.split(".")
    for depth, part in enumerate(parts):
        here = ".".join(parts[: depth + 1])
        last = depth == len(parts) - 1
        if isinstance(data, list):
            if not part.isdigit() or int(part) >= len(data):
                msg = f"{here}: must be a position below {len(data)}; got {part!r}"
                raise OptionError(msg)
            key: Any = int(part)
        elif isinstance(data, dict):
            if not last and part not in data:
                msg = f"{here}: unknown option{nearest(part, data)}"
                raise OptionError(msg)
            key = part
        else:
            msg = f"{here}: unknown option; {'.'.join(parts[:depth])} is a single value"
            raise OptionError(msg)
        if last:
            data[key] = value
        else:
            data = data[key]
