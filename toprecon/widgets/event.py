"""One event: its momenta, with the chosen and the true assignment."""

from __future__ import annotations

from typing import Any

import ipywidgets
import numpy as np

from toprecon import figures
from toprecon.study import PairingClass
from toprecon.widgets.base import Panel
from toprecon.widgets.parts import Picture, said

KINDS = [
    ("any pairing", ""),
    ("correct", "CORRECT"),
    ("b jets swapped", "B_SWAPPED"),
    ("W jets mixed", "W_MIXED"),
    ("unmatched", "UNMATCHED"),
    ("wrong hemisphere", "FLIPPED"),
]


class EventPanel(Panel):
    """Events one by one, of a kind that can be chosen."""

    title = "One event"

    def build(self) -> list[Any]:
        """Make the widgets, top to bottom."""
        self.kind = ipywidgets.Dropdown(
            description="selected events with",
            options=KINDS,
            value="",
            style={"description_width": "11em"},
            layout=ipywidgets.Layout(width="24em"),
        )
        self.number = ipywidgets.BoundedIntText(
            value=1,
            min=1,
            max=1,
            description="number",
            style={"description_width": "4.5em"},
            layout=ipywidgets.Layout(width="11em"),
        )
        self.of = ipywidgets.HTML()
        self.picture = Picture()
        self._rows = np.zeros(0, dtype=np.int64)
        self._made_for: Any = None
        for item in (self.kind, self.number):
            item.observe(lambda _: self.redraw(), names="value")
        return [
            ipywidgets.HBox([self.kind, self.number, self.of]),
            self.picture.widget,
        ]

    @property
    def row(self) -> int:
        """Row of the table shown; -1 if no event is of the kind."""
        position = self.number.value - 1
        return int(self._rows[position]) if position < len(self._rows) else -1

    def paint(self) -> None:
        """Draw the event, once the study has settled."""
        if not self.live.is_settled:
            return
        made_for = (self.live.plan, self.kind.value)
        if self._made_for != made_for:
            self._made_for = made_for
            self._rows = self._of_the_kind()
            self.of.value = said(f"of {len(self._rows):,}")
            self.number.max = max(1, len(self._rows))
        if self.row < 0:
            self.of.value = said("no such event is selected")
            return
        view = self.live.view_event(self.row)
        caption = (
            f"event {self.live.table['id'][self.row]:016x} · {self.shared.caption}"
        )
        self.picture.draw(
            "event",
            lambda figure: figures.event_figure(view, caption=caption, figure=figure),
        )

    def python(self) -> str:
        """Return Python that gives what is shown."""
        return (
            "from toprecon.figures import event_figure\n"
            "from toprecon.study import LiveStudy\n\n"
            "live = LiveStudy(source, plan, synchronous=True)\n"
            f"event_figure(live.view_event({self.row}))"
        )

    def _of_the_kind(self) -> np.ndarray:
        """Rows of the selected events of the kind chosen."""
        table, kind = self.live.table, self.kind.value
        keep = self.live.selected()
        if kind == "FLIPPED":
            keep &= table["cos_theta_true"] * table["cos_theta_reco"] < 0
        elif kind:
            keep &= table["pairing_class"] == PairingClass[kind]
        return np.flatnonzero(keep)
