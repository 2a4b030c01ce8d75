"""Base of all settings: frozen, validated, readable data.

One declaration of a field gives its range check, its key in the plan file, its help
on the command line and its control in the notebook. A wrong value raises
:class:`~toprecon.errors.OptionError` naming the path, the limits, what was received
and the nearest known name.
"""

from __future__ import annotations

import types
import typing
from typing import Any, Self

from pydantic import BaseModel, ConfigDict, Field, ValidationError
from pydantic.fields import FieldInfo

from toprecon.errors import OptionError, nearest


def option(
    default: Any,
    doc: str,
    *,
    unit: str = "",
    low: float | None = None,
    high: float | None = None,
    step: float | None = None,
    above: float | None = None,
    factory: Any = None,
) -> Any:
    """Declare one setting.

    Parameters
    ----------
    default : object
        Value used when the plan is silent; ``...`` for a required setting.
    doc : str
        One line: what the setting means. It is the help text everywhere.
    unit : str
        ``"GeV"``, ``"rad"``, or empty for a pure number.
    low, high : float, optional
        Smallest and largest allowed value, inclusive.
    step : float, optional
        Step of a control; it does not restrict the value.
    above : float, optional
        Exclusive lower limit.
    factory : callable, optional
        Makes the default instead of ``default`` (for nested options).

    Returns
    -------
    pydantic field
        To be assigned in the body of an :class:`Options` class.
    """
    extra: dict[str, Any] = {"unit": unit}
    if step is not None:
        extra["step"] = step
    settings: dict[str, Any] = {
        key: value
        for key, value in (("ge", low), ("le", high), ("gt", above))
        if value is not None
    }
    if factory is not None:
        settings["default_factory"] = factory
    else:
        settings["default"] = default
    return Field(description=doc, json_schema_extra=extra, **settings)


class Options(BaseModel):
    """Base class of every settings model: frozen, closed, hashable."""

    model_config = ConfigDict(
        frozen=True,
        extra="forbid",
        allow_inf_nan=False,
        validate_default=True,
        use_enum_values=False,
        hide_input_in_errors=False,
    )

    def __init__(self, **settings: Any) -> None:
        try:
            super().__init__(**settings)
        except ValidationError as error:
            raise OptionError(explain(error, type(self))) from None

    # pydantic calls a custom __init__ for nested models unless it is marked so;
    # nested models must report through the outermost one to know their path
    __init__.__pydantic_base_init__ = True  # type: ignore[attr-defined]

    def replace(self, **settings: Any) -> Self:
        """Return a validated copy with some settings changed.

        Parameters
        ----------
        **settings
            New values, by name.

        Returns
        -------
        Options
            A new object; the old one is unchanged.
        """
        current = {name: getattr(self, name) for name in type(self).model_fields}
        return type(self)(**{**current, **settings})

    def to_mapping(self) -> dict[str, Any]:
        """Return plain data (numbers, strings, lists, dicts), without unset ``None``.

        Returns
        -------
        dict
            Ready for TOML or JSON; ``type(self)(**mapping)`` gives an equal object.
        """
        return self.model_dump(mode="json", exclude_none=True)


_KINDS = {
    "int_": "a whole number",
    "float_": "a number",
    "bool_": "true or false",
    "string_type": "text",
    "tuple_type": "a list",
    "list_type": "a list",
    "model_": "a table of settings",
    "dict_type": "a table of settings",
}
"""What a value must be, by the start of the kind of mistake."""


def explain(error: ValidationError, model: type[BaseModel]) -> str:
    """Turn a pydantic error into sentences in the house form.

    Parameters
    ----------
    error : ValidationError
        What pydantic found.
    model : type
        The outermost model, used to look up units and known names.

    Returns
    -------
    str
        One clause per problem, joined by ``"; "``.
    """
    return "; ".join(_sentence(item, model) for item in error.errors())


def _sentence(item: Any, model: type[BaseModel]) -> str:
    """One problem as ``path: required; got value``."""
    location = [part for part in item["loc"] if not str(part).startswith("function-")]
    path = ".".join(str(part) for part in location) or model.__name__
    received = item.get("input")
    kind = item["type"]
    if kind == "extra_forbidden":
        owner, _ = _resolve(model, location[:-1])
        hint = nearest(str(location[-1]), owner.model_fields if owner else ())
        return f"{path}: unknown option{hint}"
    if kind == "missing":
        return f"{path}: required, but not given"
    _, field = _resolve(model, location)
    extra = field.json_schema_extra if field is not None else None
    unit = f" {extra['unit']}" if isinstance(extra, dict) and extra.get("unit") else ""
    context = item.get("ctx", {})
    signs = {
        "greater_than_equal": (">=", "ge"),
        "less_than_equal": ("<=", "le"),
        "greater_than": (">", "gt"),
        "less_than": ("<", "lt"),
    }
    if kind in signs:
        sign, key = signs[kind]
        return f"{path}: must be {sign} {context[key]:g}{unit}; got {received!r}"
    if kind == "finite_number":
        return f"{path}: must be a finite number; got {received!r}"
    if kind in {"enum", "literal_error"}:
        return f"{path}: must be one of {context['expected']}; got {received!r}"
    if kind == "value_error":
        return f"{path}: {context['error']}"
    for start, wanted in _KINDS.items():
        if kind.startswith(start):
            unit = f" [{unit.strip()}]" if unit else ""
            return f"{path}: must be {wanted}{unit}; got {received!r}"
    text = item["msg"][0].lower() + item["msg"][1:]
    return f"{path}: {text}; got {received!r}"


def _resolve(
    model: type[BaseModel], location: list[Any]
) -> tuple[type[BaseModel] | None, FieldInfo | None]:
    """Model that owns the last part of a path, and the field it names."""
    owner: type[BaseModel] | None = model
    field: FieldInfo | None = None
    for part in location:
        if isinstance(part, int):
            continue
        if owner is None or part not in owner.model_fields:
            continue
        field = owner.model_fields[part]
        owner = _model_in(field.annotation) or owner
    return owner, field


def _model_in(annotation: Any) -> type[BaseModel] | None:
    """Find the settings model inside an annotation such as ``tuple[Term, ...]``."""
    if isinstance(annotation, type) and not isinstance(annotation, types.GenericAlias):
        return annotation if issubclass(annotation, BaseModel) else None
    for part in typing.get_args(annotation):
        found = _model_in(part)
        if found is not None:
            return found
    return None
