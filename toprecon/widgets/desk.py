"""The desk: the cuts on the left, one panel at a time beside them."""

from __future__ import annotations

from typing import Any

import ipywidgets

from toprecon.study import EventTable, LiveStudy, StudyPlan, StudyResult
from toprecon.widgets.angle import AnglePanel
from toprecon.widgets.base import Panel, Shared, show_in_cell
from toprecon.widgets.boosted import BoostedPanel
from toprecon.widgets.comparing import ComparePanel
from toprecon.widgets.cuts import CutsPanel
from toprecon.widgets.event import EventPanel
from toprecon.widgets.events import EventsPanel
from toprecon.widgets.handing import HandOffPanel
from toprecon.widgets.migration import MigrationPanel
from toprecon.widgets.pairing import PairingPanel
from toprecon.widgets.parts import ErrorLine, close_all
from toprecon.widgets.scan import ScanPanel

PANELS: tuple[type[Panel], ...] = (
    AnglePanel,
    PairingPanel,
    ScanPanel,
    MigrationPanel,
    EventPanel,
    EventsPanel,
    BoostedPanel,
    ComparePanel,
    HandOffPanel,
)


class Desk:
    """Control surface of a study.

    Parameters
    ----------
    source : LiveStudy, EventTable, EventSource, events, path or list of paths
        What is studied; a path may be a catalogue (TOML).
    plan : StudyPlan, optional
        The default plan if absent.
    synchronous : bool
        Work in the calling thread, for tests and notebooks without anybody watching.
    layout, catalogue : optional
        How to read files, see :func:`toprecon.open_events`.

    Notes
    -----
    ``desk.plan`` is the plan as edited, ``desk.result`` the result shown;
    ``desk.live`` is the study beneath, which needs no notebook. ``desk.panels`` holds
    the panels by title; only the one on view is drawn.
    """

    def __init__(
        self,
        source: Any,
        plan: StudyPlan | None = None,
        *,
        synchronous: bool = False,
        layout: Any = None,
        catalogue: Any = None,
    ) -> None:
        self.shared = Shared(
            source, plan, synchronous=synchronous, layout=layout, catalogue=catalogue
        )
        with self.live.lock:
            self.cuts = CutsPanel(self.shared)
            self.panels = {kind.title: kind(self.shared) for kind in PANELS}
            self.view = ipywidgets.ToggleButtons(
                options=list(self.panels),
                value=AnglePanel.title,
                style={"button_width": "auto", "font_weight": "600"},
                layout=ipywidgets.Layout(margin="0 0 8px 0"),
            )
            self.view.observe(lambda _: self._choose(), names="value")
            self._right = ipywidgets.VBox(
                layout=ipywidgets.Layout(width="auto", max_width="100%")
            )
            self.cuts.widget.layout.margin = "0 18px 0 0"
            self.widget = ipywidgets.VBox(
                [
                    *self.shared.header,
                    ipywidgets.HBox(
                        [
                            self.cuts.widget,
                            ipywidgets.VBox(
                                [self.view, self._right],
                                layout=ipywidgets.Layout(
                                    flex="1 1 520px", max_width="760px", min_width="0"
                                ),
                            ),
                        ],
                        layout=ipywidgets.Layout(flex_flow="row wrap"),
                    ),
                ]
            )
            self.widget.add_class("toprecon")
            self.cuts.on_view = True
            self._choose()

    @property
    def live(self) -> LiveStudy:
        """The study beneath."""
        return self.shared.live

    @property
    def plan(self) -> StudyPlan:
        """The plan as edited."""
        return self.live.plan

    @property
    def result(self) -> StudyResult:
        """The newest result, waiting for it if it is on its way."""
        return self.live.wait()

    @property
    def table(self) -> EventTable:
        """The event table behind the result."""
        self.live.wait()
        return self.live.table

    @property
    def errors(self) -> ErrorLine:
        """The line of errors."""
        return self.shared.errors

    @property
    def panel(self) -> Panel:
        """The panel on view."""
        return self.panels[self.view.value]

    def close(self) -> None:
        """Stop the study and free every widget."""
        self.shared.close()
        self.cuts.close()
        for panel in self.panels.values():
            panel.close()
        close_all(self.widget)

    def _choose(self) -> None:
        """Put the panel chosen on view."""
        with self.live.lock:
            for panel in self.panels.values():
                panel.on_view = panel is self.panel
            self._right.children = [self.panel.widget]
            self.shared.refresh()

    def _ipython_display_(self) -> None:
        show_in_cell(self)
