"""Settings by their paths in a plan: what differs, what is put where, text as values."""

from __future__ import annotations

import tomllib
from typing import Any

from toprecon.errors import OptionError, nearest


def changes(old: Any, new: Any, path: str = "") -> dict[str, Any]:
    """Find the settings, by path, that differ from the old ones."""
    if old == new:
        return {}
    inside = f"{path}." if path else ""
    if isinstance(old, dict) and isinstance(new, dict) and set(old) <= set(new):
        out: dict[str, Any] = {}
        for key in new:
            out.update(changes(old.get(key), new[key], f"{inside}{key}"))
        return out
    if isinstance(old, list) and isinstance(new, list) and 0 < len(old) == len(new):
        out = {}
        for index, (a, b) in enumerate(zip(old, new, strict=True)):
            out.update(changes(a, b, f"{inside}{index}"))
        return out
    return {path: new}


def toml_data(text: str, where: str) -> dict[str, Any]:
    """Read TOML text."""
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        msg = f"{where}: must be TOML; {error}"
        raise OptionError(msg) from error


def toml_value(text: str) -> Any:
    """Read text as a TOML value; plain words stay text."""
    try:
        return tomllib.loads(f"value = {text}")["value"]
    except tomllib.TOMLDecodeError:
        return text


def put(data: Any, path: str, value: Any) -> None:
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
