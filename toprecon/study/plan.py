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
from collections.abc import Iterable
from enum import StrEnum
from pathlib import Path
from typing import Any, Self

import tomli_w
from pydantic import field_validator, model_validator

from toprecon.asymmetry import EstimatorOptions
from toprecon.boosted import OBSERVABLES as BOOSTED_OBSERVABLES
from toprecon.boosted import BoostedOptions
from toprecon.errors import InputError, OptionError
from toprecon.events import Channel, Observable, find_observable
from toprecon.migration import MigrationOptions
from toprecon.options import Options, option
from toprecon.pairing import (
    FIT_OBSERVABLES,
    Calibration,
    FitOptions,
    PairingOptions,
    observables_with,
)
from toprecon.pairing import OBSERVABLES as PAIRING_OBSERVABLES
from toprecon.selection import OBSERVABLES as SELECTION_OBSERVABLES
from toprecon.selection import SelectionOptions
from toprecon.study.plan_files import (
    calibration_name,
    read_calibration,
    read_calibrations,
    write_calibrations,
)
from toprecon.study.settings import changes, put, toml_data, toml_value
from toprecon.study.storing import write_text
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
        return cls._from_data(toml_data(text, where), where, None)

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
        return cls._from_data(toml_data(text, str(path)), str(path), Path(path))

    @classmethod
    def _from_data(cls, data: dict[str, Any], where: str, path: Path | None) -> Self:
        """Make a plan of data from a file; ``where`` starts the message."""
        if path is not None:
            data = read_calibrations(data, path)
        try:
            return cls(**data)
        except OptionError as error:
            msg = f"{where}: {error}"
            raise OptionError(msg) from None

    def to_toml(self) -> str:
        """Return the plan as TOML text, every setting written out."""
        return tomli_w.dumps(self.to_mapping())

    def save(self, path: str | os.PathLike[str]) -> Path:
        """Write the plan to a TOML file, complete or not at all.

        Parameters
        ----------
        path : path
            File to write; replaced if it exists. Calibrations of the pairing go into
            files of their own beside it, named by their hash.

        Returns
        -------
        Path
            The file written.
        """
        target = Path(path)
        target.parent.mkdir(parents=True, exist_ok=True)
        data = write_calibrations(self.to_mapping(), target.parent)
        write_text(target, tomli_w.dumps(data))
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
            put(data, path, toml_value(value) if isinstance(value, str) else value)
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

    def with_calibrations(
        self, *calibrations: Calibration | str | os.PathLike[str], **settings: Any
    ) -> Self:
        """Return the plan with calibrations of the pairing, and what uses them.

        Parameters
        ----------
        *calibrations : Calibration or path
            One per collision energy; paths are those of files written by :meth:`save`.
        **settings
            Other fields of the pairing, such as ``charges=True``. The score is
            ``ratio`` if not given.

        Returns
        -------
        StudyPlan
            A new plan.

        Raises
        ------
        InputError
            If a file is not there.
        OptionError
            If it is not the calibration that its name says.
        """
        tables = [
            item
            if isinstance(item, Calibration)
            else Calibration(**read_calibration(Path(item), "calibration"))
            for item in calibrations
        ]
        return self.replace(pairing=self.pairing.calibrated(*tables, **settings))

    def without_cuts_on(self, *starts: str) -> Self:
        """Return the plan without cuts on observables that start so.

        Parameters
        ----------
        *starts : str
            Such as ``"boosted."``.

        Returns
        -------
        StudyPlan
            The other cuts keep their order.
        """
        cuts = (cut for cut in self.cuts if not cut.observable.startswith(starts))
        return self.replace(cuts=tuple(cuts))

    def as_code(self) -> str:
        """Return a Python expression that makes this plan from the default one.

        Returns
        -------
        str
            Calibrations appear as the names of the files that :meth:`save` writes.
        """
        text = "StudyPlan()"
        data, usual = self.to_mapping(), type(self)().to_mapping()
        tables = data["pairing"].pop("calibrations", [])
        usual["pairing"].pop("calibrations", None)
        changed = changes(usual, data)
        if tables:
            names = "".join(f"{calibration_name(t)!r}, " for t in tables)
            score = changed.get("pairing.score", "plain")
            if score == "plain":  # put back below, without new targets of the terms
                changed["pairing.score"], score = score, "ratio"
            else:
                del changed["pairing.score"]
            text += f".with_calibrations({names}score={score!r})"
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
    def observables(self) -> tuple[Observable, ...]:
        """Every observable a cut can use, with the range it has under this plan."""
        own = {item.name: item for item in observables_with(self.pairing)}
        return tuple(own.get(item.name, item) for item in OBSERVABLES)

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
