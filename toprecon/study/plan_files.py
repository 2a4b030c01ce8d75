"""Plans as files: the plan in one, every calibration in its own, named by its hash.

A calibration is some hundred numbers that nobody reads beside the cuts. In the file of
a plan each is therefore a name such as ``calibration_500_3f0a99c1d2e4.toml``, that of a
file in the same folder; the end of the name is the hash of the content, so that a plan
can never be read with another calibration than the one it was saved with.
"""

from __future__ import annotations

import hashlib
import json
import tomllib
from pathlib import Path
from typing import Any

import tomli_w

from toprecon.errors import InputError, OptionError
from toprecon.study.storing import write_text

SECTION, KEY = "pairing", "calibrations"


def calibration_name(data: dict[str, Any]) -> str:
    """Return the file name of a calibration.

    Parameters
    ----------
    data : dict
        The calibration as plain data.

    Returns
    -------
    str
        Collision energy and the first 12 digits of the hash of the content.
    """
    text = json.dumps(data, sort_keys=True)
    digest = hashlib.sha256(text.encode()).hexdigest()
    return f"calibration_{data['sqrt_s']:g}_{digest[:12]}.toml"


def write_calibrations(data: dict[str, Any], folder: Path) -> dict[str, Any]:
    """Write the calibrations of a plan to files of their own.

    Parameters
    ----------
    data : dict
        A plan as plain data.
    folder : Path
        Where the plan goes.

    Returns
    -------
    dict
        The plan with file names in the place of calibrations.
    """
    tables = data[SECTION].get(KEY, [])
    if not tables:
        return data
    names = []
    for table in tables:
        name = calibration_name(table)
        write_text(folder / name, tomli_w.dumps(table))
        names.append(name)
    return {**data, SECTION: {**data[SECTION], KEY: names}}


def read_calibrations(data: dict[str, Any], plan: Path) -> dict[str, Any]:
    """Put the content of calibration files into a plan.

    Parameters
    ----------
    data : dict
        A plan as read from its file.
    plan : Path
        That file; names are looked up in its folder.

    Returns
    -------
    dict
        The plan with calibrations in the place of names.

    Raises
    ------
    InputError
        If a file named is not there.
    OptionError
        If its content is not TOML, or not what its name says.
    """
    section = data.get(SECTION)
    names = section.get(KEY) if isinstance(section, dict) else None
    if not isinstance(section, dict) or not isinstance(names, list):
        return data
    where = f"{plan}: {SECTION}.{KEY}"
    tables = [
        read_calibration(plan.parent / name, where) if isinstance(name, str) else name
        for name in names
    ]
    return {**data, SECTION: {**section, KEY: tables}}


def read_calibration(path: Path, where: str) -> dict[str, Any]:
    """Read one calibration and compare it with its name.

    Parameters
    ----------
    path : Path
        Its file.
    where : str
        Start of the message.

    Returns
    -------
    dict
        The calibration as plain data.

    Raises
    ------
    InputError
        If the file is not there.
    OptionError
        If its content is not TOML, or not what its name says.
    """
    try:
        data = tomllib.loads(path.read_text(encoding="utf-8"))
        name = calibration_name(data)
    except OSError as error:
        msg = (
            f"{where}: the calibration {str(path)!r} is required, but "
            f"{str(error.strerror).lower()}; keep it in the folder of the plan"
        )
        raise InputError(msg) from error
    except (tomllib.TOMLDecodeError, UnicodeDecodeError, KeyError, ValueError) as error:
        msg = f"{where}: {str(path)!r} must be a calibration in TOML; {error}"
        raise OptionError(msg) from error
    if name != path.name:
        msg = (
            f"{where}: {str(path)!r} must have the content that its name says, but its "
            f"hash gives {name!r}; the file was changed: make the calibration again"
        )
        raise OptionError(msg)
    return data
