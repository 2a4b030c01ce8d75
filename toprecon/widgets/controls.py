"""Controls made from the declarations of settings: limits, unit, one line of help."""

from __future__ import annotations

import math
import types
import typing
from enum import Enum
from typing import Any

import ipywidgets
from pydantic.fields import FieldInfo

from toprecon.errors import OptionError
from toprecon.options import Options
from toprecon.widgets.base import Panel
from toprecon.widgets.parts import helping, spelled


class OptionControls:
    """One control per simple setting of an options object.

    Parameters
    ----------
    panel : Panel
        Whose plan is edited and whose line shows errors.
    options : Options
        Present values.
    path : str
        Path of the options in the plan, such as ``selection``.
    only : tuple of str, optional
        Names of the settings wanted; all simple ones if absent.

    Notes
    -----
    Settings that are tuples or tables have no control here. A setting that may be
    absent is a text box; empty means absent.
    """

    def __init__(
        self,
        panel: Panel,
        options: Options,
        path: str,
        *,
        only: tuple[str, ...] | None = None,
    ) -> None:
        self._options = options
        self._path = path
        self._panel = panel
        self._quiet = False
        self.by_name: dict[str, Any] = {}
        rows = []
        for name, field in type(options).model_fields.items():
            if only is not None and name not in only:
                continue
            control = _control(field, getattr(options, name), name)
            if control is None:
                continue
            control.observe(
                lambda event, key=name: self._changed(key, event["new"]), names="value"
            )
            self.by_name[name] = control
            help_line = helping(field.description or "")
            help_line.layout.margin = "2px 0 0 10px"
            rows.append(ipywidgets.HBox([control, help_line]))
        self.widget = ipywidgets.VBox(rows)

    def disable(self) -> None:
        """Show the settings without letting anybody change them."""
        for control in self.by_name.values():
            control.disabled = True

    def follow(self, options: Options) -> None:
        """Show settings that were not changed with these controls."""
        old, self._options = self._options, options
        self._quiet = True
        try:
            for name, control in self.by_name.items():
                value = getattr(options, name)
                if value != getattr(old, name):
                    control.value = _shown(control, value)
        finally:
            self._quiet = False

    def _changed(self, name: str, value: Any) -> None:
        """Hand a new value to the plan."""
        if self._quiet:
            return
        with self._panel.errors.guard():
            path = f"{self._path}.{name}"
            kind = _absent_kind(type(self._options).model_fields[name])
            if kind is not None:
                value = number_or_none(value, path, kind=kind)
            elif isinstance(value, Enum):
                value = value.value
            self._panel.live.set_settings({path: value})


def number_or_none(text: str, where: str, *, kind: Any = float) -> Any:
    """Read a number from a text box.

    Parameters
    ----------
    text : str
        What somebody typed.
    where : str
        Path of the setting, for the message.
    kind : type
        ``int`` or ``float``.

    Returns
    -------
    number or None
        None for an empty box.

    Raises
    ------
    OptionError
        If it is neither.
    """
    if not text.strip():
        return None
    try:
        return kind(text)
    except ValueError:
        word = "whole number" if kind is int else "number"
        msg = f"{where}: must be a {word} or empty; got {text!r}"
        raise OptionError(msg) from None


def _shown(control: Any, value: Any) -> Any:
    """Return a value as its control shows it."""
    if isinstance(control, ipywidgets.Text):
        return "" if value is None else f"{value:.12g}"
    return value


def _absent_kind(field: FieldInfo) -> Any:
    """Type of a setting that may be absent: int or float; None for others."""
    kind: Any = field.annotation
    if isinstance(kind, types.UnionType) or typing.get_origin(kind) is typing.Union:
        kinds = [k for k in typing.get_args(kind) if k is not type(None)]
        if len(kinds) == 1 and kinds[0] in {int, float}:
            return kinds[0]
    return None


def _control(field: FieldInfo, value: Any, name: str) -> Any:
    """Make the control that suits the type of a setting."""
    kind: Any = field.annotation
    extra = field.json_schema_extra
    unit = str(extra.get("unit", "")) if isinstance(extra, dict) else ""
    label = spelled(name) + (f" [{unit}]" if unit else "")
    common = {
        "description": label,
        "tooltip": field.description or "",
        "style": {"description_width": "13.5em"},
        "layout": {"width": "20.5em", "flex": "0 0 auto"},
    }
    if _absent_kind(field) is not None:
        return ipywidgets.Text(
            value="" if value is None else f"{value:.12g}",
            placeholder="usual",
            continuous_update=False,
            **common,
        )
    if kind is bool:
        common["style"] = {"description_width": "8em"}  # the label is behind the box
        return ipywidgets.Checkbox(value=value, **common)
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
