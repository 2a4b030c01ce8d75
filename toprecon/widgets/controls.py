"""Controls made from the declarations of settings: limits, unit, one line of help."""

from __future__ import annotations

import math
import types
import typing
from collections.abc import Callable
from enum import Enum
from typing import Any

import ipywidgets
from pydantic.fields import FieldInfo

from toprecon.options import Options

WIDE = ipywidgets.Layout
SetSetting = Callable[[str, Any], None]


def controls_of(options: Options, path: str, change: SetSetting) -> dict[str, Any]:
    """Return one control per simple setting of an options object.

    Parameters
    ----------
    options : Options
        Present values.
    path : str
        Path of the options in the plan, such as ``selection``.
    change : callable
        Called with (path of the setting, new value) when somebody changes it.

    Returns
    -------
    dict of widget
        By name; settings that are tuples, tables or optional have no control here.
    """
    out = {}
    for name, field in type(options).model_fields.items():
        widget = _control(field, getattr(options, name), name)
        if widget is None:
            continue
        full = f"{path}.{name}"
        widget.observe(
            lambda event, key=full: change(key, _plain(event["new"])), names="value"
        )
        out[name] = widget
    return out


def _plain(value: Any) -> Any:
    """Value of an enumeration as its text."""
    return value.value if isinstance(value, Enum) else value


def _control(field: FieldInfo, value: Any, name: str) -> Any:
    """Make the control that suits the type of a setting."""
    kind: Any = field.annotation
    if isinstance(kind, types.UnionType) or typing.get_origin(kind) is not None:
        return None
    extra = field.json_schema_extra
    unit = str(extra.get("unit", "")) if isinstance(extra, dict) else ""
    label = name.replace("_", " ") + (f" [{unit}]" if unit else "")
    common = {
        "description": label,
        "tooltip": field.description or "",
        "style": {"description_width": "11em"},
        "layout": ipywidgets.Layout(width="20em"),
    }
    if kind is bool:
        return ipywidgets.Checkbox(value=value, indent=False, **common)
    if isinstance(kind, type) and issubclass(kind, Enum):
        choices = [(str(item.value), item) for item in kind]
        return ipywidgets.Dropdown(options=choices, value=value, **common)
    low, high = _limits(field)
    if kind is int:
        return ipywidgets.BoundedIntText(
            value=value, min=int(max(low, -1e9)), max=int(min(high, 1e9)), **common
        )
    if kind is float:
        step = extra.get("step") if isinstance(extra, dict) else None
        return ipywidgets.BoundedFloatText(
            value=value, min=max(low, -1e12), max=min(high, 1e12), step=step, **common
        )
    return None


def _limits(field: FieldInfo) -> tuple[float, float]:
    """Smallest and largest value that the declaration allows."""
    low, high = -math.inf, math.inf
    for item in field.metadata:
        low = max(low, getattr(item, "ge", -math.inf), getattr(item, "gt", -math.inf))
        high = min(high, getattr(item, "le", math.inf), getattr(item, "lt", math.inf))
    return low, high
