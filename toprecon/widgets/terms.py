"""Terms of the pairing: which count, with which target and resolution."""

from __future__ import annotations

import math
from typing import Any

import ipywidgets

from toprecon.widgets.base import Panel
from toprecon.widgets.controls import number_or_none
from toprecon.widgets.parts import helping, spelled

BOXES = {
    "target": "target",
    "below": "resolution below the target",
    "above": "resolution above the target",
}


class TermControls:
    """One line per term of the pairing chi-square.

    Target and resolutions are empty where the usual ones are used; a number takes
    their place. Every change pairs the jets anew.
    """

    def __init__(self, panel: Panel) -> None:
        self._panel = panel
        self._quiet = False
        self.rows: dict[str, dict[str, Any]] = {}
        lines = []
        for position, term in enumerate(panel.live.plan.pairing.terms):
            name = term.name.value
            row = {
                "on": ipywidgets.Checkbox(
                    value=term.on,
                    indent=False,
                    description=spelled(name),
                    layout=ipywidgets.Layout(width="14em"),
                ),
                **{
                    key: ipywidgets.Text(
                        value=_text(getattr(term, key)),
                        placeholder="usual",
                        description=key,
                        tooltip=f"{meaning}: {name.replace('_', ' ')}",
                        continuous_update=False,
                        style={"description_width": "3.4em"},
                        layout=ipywidgets.Layout(width="10.5em"),
                    )
                    for key, meaning in BOXES.items()
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
                helping(
                    "terms of the chi-square: ((value - target) / resolution)^2, with "
                    "a resolution below and one above the target"
                ),
                *lines,
            ]
        )

    def disable(self) -> None:
        """Show the terms without letting anybody change them."""
        for row in self.rows.values():
            for widget in row.values():
                widget.disabled = True

    def follow(self, pairing: Any) -> None:
        """Show terms that were not changed with these controls."""
        self._quiet = True
        try:
            for term in pairing.terms:
                row = self.rows.get(term.name.value)
                if row is None:
                    continue
                if row["on"].value != term.on:
                    row["on"].value = term.on
                for key in BOXES:
                    if _number(row[key].value) != getattr(term, key):
                        row[key].value = _text(getattr(term, key))
        finally:
            self._quiet = False

    def _changed(self, position: int, key: str, value: Any) -> None:
        if self._quiet:
            return
        with self._panel.errors.guard():
            live = self._panel.live
            pairing = live.plan.pairing
            terms = list(pairing.terms)
            if key != "on":
                value = number_or_none(value, f"pairing.terms.{position}.{key}")
            terms[position] = terms[position].replace(**{key: value})
            live.configure(pairing=pairing.replace(terms=tuple(terms)))


def _number(text: str) -> float | None:
    """Read a number; NaN for what is none."""
    try:
        return float(text) if text.strip() else None
    except ValueError:
        return math.nan


def _text(value: float | None) -> str:
    """Return a number for a text box; empty for none."""
    return "" if value is None else f"{value:.12g}"
