"""Terms of the pairing: which count, with which target and resolution."""

from __future__ import annotations

from typing import Any

import ipywidgets

from toprecon.study import LiveStudy
from toprecon.widgets.base import ErrorLine, helping, labelled


class TermControls:
    """One line per term of the pairing chi-square.

    Target and resolutions are empty where the usual ones are used; a number takes
    their place. Every change pairs the jets anew.
    """

    def __init__(self, live: LiveStudy, errors: ErrorLine) -> None:
        self._live = live
        self._errors = errors
        self.rows: dict[str, dict[str, Any]] = {}
        lines = []
        for position, term in enumerate(live.plan.pairing.terms):
            name = term.name.value
            row = {
                "on": ipywidgets.Checkbox(
                    value=term.on,
                    indent=False,
                    description=name.replace("_", " "),
                    layout=ipywidgets.Layout(width="13.5em"),
                ),
                **{
                    key: ipywidgets.Text(
                        value=_text(getattr(term, key)),
                        placeholder=key,
                        tooltip=f"{key} of {name.replace('_', ' ')}",
                        continuous_update=False,
                        layout=ipywidgets.Layout(width="4.7em"),
                    )
                    for key in ("target", "below", "above")
                },
            }
            for key, widget in row.items():
                widget.observe(
                    lambda event, p=position, k=key: self._changed(p, k, event["new"]),
                    names="value",
                )
            self.rows[name] = row
            lines.append(ipywidgets.HBox(list(row.values())))
        self.widget = ipywidgets.VBox(
            [
                labelled("Pairing terms"),
                helping("target, resolution below and above it; empty: the usual ones"),
                *lines,
            ]
        )

    def _changed(self, position: int, key: str, value: Any) -> None:
        with self._errors.guard():
            pairing = self._live.plan.pairing
            terms = list(pairing.terms)
            if key != "on":
                value = _number(value, f"pairing.terms.{position}.{key}")
            terms[position] = terms[position].replace(**{key: value})
            self._live.configure(pairing=pairing.replace(terms=tuple(terms)))


def _text(value: float | None) -> str:
    """Return a number for a text box; empty for none."""
    return "" if value is None else f"{value:g}"


def _number(text: str, where: str) -> float | None:
    """Read a number from a text box."""
    from toprecon.errors import OptionError

    if not text.strip():
        return None
    try:
        return float(text)
    except ValueError:
        msg = f"{where}: must be a number or empty; got {text!r}"
        raise OptionError(msg) from None
