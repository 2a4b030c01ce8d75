"""What the columns of a file mean: the declarative file layout.

A layout says, for each quantity of Events, which column holds it and how: the
coordinate system (by the components that are named), the unit of energy, value maps,
constants, and what marks an absent object. It is plain data, saved as TOML. Which
format to use when: ``columns`` for anything that is one column per quantity (flat
ROOT trees, RNTuples, Parquet), ``edm4hep`` and ``les_houches`` for these standards.
"""

from __future__ import annotations

import os
import tomllib
from collections.abc import Iterator
from enum import StrEnum
from pathlib import Path
from typing import Any, Self

import tomli_w
from pydantic import (
    SerializerFunctionWrapHandler,
    field_validator,
    model_serializer,
    model_validator,
)

from toprecon.errors import InputError, OptionError
from toprecon.events import TRUTH_MOMENTA, Helicity
from toprecon.io.edm4hep_options import Edm4hepOptions
from toprecon.options import Options, option

DIRECTIONS = (("px", "py", "pz"), ("pt", "eta", "phi"), ("p", "theta", "phi"))
ENERGY_UNITS = {"GeV": 1.0, "MeV": 1e-3, "TeV": 1e3}
MOMENTUM_COMPONENTS = ("E", "m", "px", "py", "pz", "pt", "eta", "phi", "p", "theta")
SLOT = "{slot}"


class Format(StrEnum):
    """How the bytes of a file are organised."""

    COLUMNS = "columns"
    EDM4HEP = "edm4hep"
    LES_HOUCHES = "les_houches"


class ColumnSource(Options):
    """Where one quantity comes from: a column, or a constant.

    In TOML a plain string names the column and a plain number is the constant.
    """

    branch: str = option("", "name of the column; empty for a constant")
    value: float | None = option(None, "the constant")
    values: dict[str, float] = option(
        None, "map of stored values to their meaning", factory=dict
    )
    default: float | None = option(None, "meaning of stored values not in the map")
    scale: float = option(1.0, "factor on the stored value")

    @model_validator(mode="before")
    @classmethod
    def _short_form(cls, data: Any) -> Any:
        if isinstance(data, str):
            return {"branch": data}
        if isinstance(data, int | float) and not isinstance(data, bool):
            return {"value": data}
        return data

    @model_validator(mode="after")
    def _one_source(self) -> Self:
        if bool(self.branch) == (self.value is not None):
            msg = "name either a column (branch) or a constant (value)"
            raise ValueError(msg)
        for key in self.values:
            try:
                float(key)
            except ValueError:
                msg = f"the keys of values must be numbers; got {key!r}"
                raise ValueError(msg) from None
        return self

    @model_serializer(mode="wrap")
    def _to_short_form(self, handler: SerializerFunctionWrapHandler) -> Any:
        data = {
            name: value
            for name, value in handler(self).items()
            if value != type(self).model_fields[name].default and value != {}
        }
        if set(data) == {"branch"}:
            return self.branch
        return self.value if set(data) == {"value"} else data


class MomentumColumns(Options):
    """Components of a momentum; which are named decides the coordinate system.

    One of px, py, pz / pt, eta, phi / p, theta, phi, and one of E or m.
    """

    E: ColumnSource | None = option(None, "energy")
    m: ColumnSource | None = option(None, "mass")
    px: ColumnSource | None = option(None, "momentum along x")
    py: ColumnSource | None = option(None, "momentum along y")
    pz: ColumnSource | None = option(None, "momentum along z")
    pt: ColumnSource | None = option(None, "momentum transverse to z")
    eta: ColumnSource | None = option(None, "pseudorapidity")
    phi: ColumnSource | None = option(None, "azimuth", unit="rad")
    p: ColumnSource | None = option(None, "absolute momentum")
    theta: ColumnSource | None = option(None, "polar angle", unit="rad")

    @model_validator(mode="after")
    def _one_system(self) -> Self:
        given = {c for c in MOMENTUM_COMPONENTS if getattr(self, c) is not None}
        rest = given - {"E", "m"}
        if rest not in map(set, DIRECTIONS) or len(given & {"E", "m"}) != 1:
            msg = (
                "a momentum needs px, py, pz or pt, eta, phi or p, theta, phi, and one "
                f"of E and m; got {', '.join(sorted(given)) or 'nothing'}"
            )
            raise ValueError(msg)
        return self

    def sources(self) -> dict[str, ColumnSource]:
        """Return the sources given, by the name of the quantity."""
        return {
            name: value
            for name in type(self).model_fields
            if isinstance(value := getattr(self, name), ColumnSource)
        }


class ObjectColumns(MomentumColumns):
    """Several objects per event: ragged columns, counted arrays or numbered slots."""

    count: str = option("", "column with the number of objects; checked if given")
    slots: tuple[int, ...] = option(
        (), "numbers to put for {slot} in the column names (jet1_px, jet2_px, ...)"
    )
    optional: bool = option(
        default=False, doc="whether the file may lack all these columns"
    )
    zero_is_absent: bool = option(
        default=False, doc="whether a momentum of zeros means that there is no object"
    )

    @model_validator(mode="after")
    def _slots_are_used(self) -> Self:
        has_slot = any(SLOT in s.branch for s in self.sources().values())
        if has_slot != bool(self.slots):
            msg = "slots: give the numbers and {slot} in the column names, or neither"
            raise ValueError(msg)
        return self


class JetColumns(ObjectColumns):
    """Jets."""

    btag: ColumnSource | None = option(None, "b score, 0 to 1")
    track_charge: ColumnSource | None = option(None, "momentum-weighted track charge")
    vertex_charge: ColumnSource | None = option(None, "charge of the b vertex")


class LeptonColumns(ObjectColumns):
    """Isolated leptons; give several tables for separate electrons and muons."""

    charge: ColumnSource | None = option(None, "charge; by default from pdg")
    pdg: ColumnSource | None = option(
        None, "particle code; a constant takes its sign from the charge"
    )
    isolation: ColumnSource | None = option(None, "isolation")


class ParticleColumns(ObjectColumns):
    """Final-state particles, without the isolated lepton."""

    charge: ColumnSource | None = option(None, "charge")
    kind: ColumnSource | None = option(
        None, "0 charged hadron, 1 photon, 2 neutral hadron, 3 electron, 4 muon"
    )
    jet_index: ColumnSource | None = option(None, "jet it belongs to; -1 none")


class PhotonColumns(ObjectColumns):
    """Isolated photons."""


class MissingColumns(MomentumColumns):
    """Missing momentum, one per event."""

    optional: bool = option(
        default=False, doc="whether the file may lack all these columns"
    )


class TruthMomentumColumns(MomentumColumns):
    """One generated momentum per event."""

    pdg: ColumnSource | None = option(None, "particle code")


class TruthColumns(Options):
    """Generated momenta, those of the vocabulary; absent ones are NaN."""

    top: TruthMomentumColumns | None = option(None, "top quark")
    antitop: TruthMomentumColumns | None = option(None, "antitop quark")
    w_plus: TruthMomentumColumns | None = option(None, "W+")
    w_minus: TruthMomentumColumns | None = option(None, "W-")
    b: TruthMomentumColumns | None = option(None, "b of the top")
    bbar: TruthMomentumColumns | None = option(None, "anti-b of the antitop")
    w_plus_up: TruthMomentumColumns | None = option(None, "neutrino or up type of W+")
    w_plus_down: TruthMomentumColumns | None = option(None, "l+ or anti-down of W+")
    w_minus_up: TruthMomentumColumns | None = option(None, "antineutrino or anti-up")
    w_minus_down: TruthMomentumColumns | None = option(None, "l- or down type of W-")
    sqrt_s_prime: ColumnSource | None = option(
        None, "collision energy after initial-state radiation", unit="GeV"
    )
    zero_is_absent: bool = option(
        default=True, doc="whether a momentum of zeros means that there is none"
    )
    optional: bool = option(
        default=False, doc="whether the file may lack all these columns"
    )

    def momenta(self) -> Iterator[tuple[str, TruthMomentumColumns]]:
        """Yield the momenta that are mapped.

        Yields
        ------
        tuple
            Name of the vocabulary and columns.
        """
        for name in TRUTH_MOMENTA:
            value = getattr(self, name)
            if value is not None:
                yield name, value


class EventColumns(Options):
    """Quantities of whole events."""

    id: str = option("", "column with a 64-bit identity; it wins over run and number")
    run: str = option("", "column with the run number")
    number: str = option("", "column with the event number")
    checksum: str = option("", "column with the checksum of all others, in own files")
    sample: str = option("", "column with the row in the stored list of samples")
    weight: ColumnSource = option(1.0, "generator weight")
    helicity: ColumnSource = option(
        0.0, "-1 for e-L e+R, +1 for e-R e+L, 0 mixed; or LR, RL, MIXED"
    )
    sqrt_s: ColumnSource | None = option(None, "nominal collision energy", unit="GeV")

    @field_validator("helicity", mode="before")
    @classmethod
    def _names_of_helicities(cls, data: Any) -> Any:
        names = Helicity.__members__
        if isinstance(data, str) and data in names:
            return float(names[data])
        if isinstance(data, dict) and isinstance(data.get("values"), dict):
            values = {
                key: float(names[v]) if isinstance(v, str) and v in names else v
                for key, v in data["values"].items()
            }
            return {**data, "values": values}
        return data


class BeamOptions(Options):
    """How the beams lie in the coordinate system of the file."""

    electron_direction: str = option(
        "auto",
        "where the electron beam goes: '+z' or '-z'; 'auto' asks the generated beam "
        "particles and takes +z where there are none",
    )
    crossing_angle: float | str = option(
        "auto",
        "full crossing angle, both beams going towards +x; 'auto' asks the generated "
        "beam particles and takes 0 where there are none",
        unit="rad",
    )

    @field_validator("electron_direction")
    @classmethod
    def _known_direction(cls, value: str) -> str:
        if value not in {"+z", "-z", "auto"}:
            msg = f"must be '+z', '-z' or 'auto'; got {value!r}"
            raise ValueError(msg)
        return value

    @field_validator("crossing_angle")
    @classmethod
    def _small_angle(cls, value: float | str) -> float | str:
        if isinstance(value, str):
            if value != "auto":
                msg = f"must be an angle in rad or 'auto'; got {value!r}"
                raise ValueError(msg)
        elif not -0.5 <= value <= 0.5:
            msg = f"must be between -0.5 and 0.5 rad; got {value!r}"
            raise ValueError(msg)
        return value


class FileLayout(Options):
    """What the columns of a file mean."""

    name: str = option("", "name of the layout, for messages")
    format: Format = option(Format.COLUMNS, "how the bytes are organised")
    tree: str = option("", "tree to read; by default 'events' or the only one")
    energy_unit: str = option("GeV", "unit of energies, momenta and masses")
    process: str = option("ttbar", "process of the sample; 'ttbar' is the signal")
    identity: str = option(
        "auto", "'auto', 'number' (run and event number) or 'entry' (place in the file)"
    )
    mass_tolerance: float = option(
        0.05,  # stored numbers may have as few as ten bits of mantissa
        "events with sqrt(p^2 - E^2) above this fraction of E are rejected",
        low=0.0,
    )
    beams: BeamOptions = option(None, "coordinate system", factory=BeamOptions)
    event: EventColumns = option(None, "whole events", factory=EventColumns)
    jets: tuple[JetColumns, ...] = option((), "jets")
    leptons: tuple[LeptonColumns, ...] = option((), "isolated leptons")
    particles: tuple[ParticleColumns, ...] = option((), "particles")
    photons: tuple[PhotonColumns, ...] = option((), "isolated photons")
    missing: MissingColumns | None = option(None, "missing momentum")
    truth: TruthColumns | None = option(None, "generated momenta")
    edm4hep: Edm4hepOptions = option(
        None, "names of collections, for this format", factory=Edm4hepOptions
    )

    @field_validator("jets", "leptons", "particles", "photons", mode="before")
    @classmethod
    def _one_table_or_several(cls, data: Any) -> Any:
        return data if isinstance(data, list | tuple) else (data,)

    @field_validator("energy_unit")
    @classmethod
    def _known_unit(cls, value: str) -> str:
        if value not in ENERGY_UNITS:
            msg = f"must be one of {', '.join(ENERGY_UNITS)}; got {value!r}"
            raise ValueError(msg)
        return value

    @field_validator("identity")
    @classmethod
    def _known_identity(cls, value: str) -> str:
        if value not in {"auto", "number", "entry"}:
            msg = f"must be 'auto', 'number' or 'entry'; got {value!r}"
            raise ValueError(msg)
        return value

    @model_validator(mode="after")
    def _has_objects(self) -> Self:
        if self.format is Format.COLUMNS and not (self.jets or self.particles):
            msg = "a layout of columns needs the columns of the jets ([jets])"
            raise ValueError(msg)
        return self

    def to_toml(self) -> str:
        """Return the layout as TOML; settings at their default are left out."""
        return tomli_w.dumps(_without_defaults(self))

    def save(self, path: str | os.PathLike[str]) -> Path:
        """Write the layout to a TOML file and return its path."""
        target = Path(path)
        target.write_text(self.to_toml(), encoding="utf-8")
        return target


def load_layout(path: str | os.PathLike[str]) -> FileLayout:
    """Read a file layout.

    Parameters
    ----------
    path : path
        TOML file.

    Returns
    -------
    FileLayout
        The layout; its name is that of the file unless it gives one.

    Raises
    ------
    InputError
        If the file is missing or not TOML.
    OptionError
        If it is not a layout; the message names the key.
    """
    source = Path(path)
    data = read_toml(source, what="a file layout")
    try:
        return FileLayout(**{"name": source.stem, **data})
    except OptionError as error:
        msg = f"{source}: {error}"
        raise OptionError(msg) from None


def read_toml(path: Path, *, what: str) -> dict[str, Any]:
    """Read a TOML file that should hold ``what``.

    Parameters
    ----------
    path : Path
        TOML file.
    what : str
        Named in the message.

    Returns
    -------
    dict
        Its content.

    Raises
    ------
    InputError
        If the file is missing or not TOML.
    """
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        msg = f"{path}: {what} in TOML is required, but cannot be read ({error})"
        raise InputError(msg) from None
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        msg = f"{path}: {what} in TOML is required, but it is not valid TOML ({error})"
        raise InputError(msg) from None


def _without_defaults(layout: FileLayout) -> dict[str, Any]:
    """Plain data without the settings that are at their default."""
    data = layout.model_dump(mode="json", exclude_none=True, exclude_defaults=True)
    event = {
        name: value
        for name, value in data.get("event", {}).items()
        if (name, value) not in (("weight", 1.0), ("helicity", 0.0))
    }
    data = {k: v for k, v in {**data, "event": event}.items() if v != {}}
    for name in ("jets", "leptons", "particles", "photons"):
        if len(data.get(name, ())) == 1:
            data[name] = data[name][0]
    return data
