"""Boosted: when to stop pairing jets and take the top as one fat jet."""

from __future__ import annotations

from typing import Any

import ipywidgets

from toprecon import figures
from toprecon.study import OBSERVABLES, Binning, BranchChoice
from toprecon.widgets.base import Panel
from toprecon.widgets.controls import OptionControls
from toprecon.widgets.parts import Picture, helping, labelled

BINS = 60
OWN = [item for item in OBSERVABLES if item.name.startswith("boosted.")]


class BoostedPanel(Panel):
    """The branch, the fat jets and their tag."""

    title = "Boosted"

    def build(self) -> list[Any]:
        """Make the widgets, top to bottom."""
        plan = self.live.plan
        self.branch = ipywidgets.Dropdown(
            description="branch",
            options=[(item.value, item) for item in BranchChoice],
            value=plan.study.branch,
            tooltip="how the pair is reconstructed",
            style={"description_width": "5em"},
            layout=ipywidgets.Layout(width="16em"),
        )
        self.branch.observe(lambda event: self._choose(event["new"]), names="value")
        self._quiet = False
        self.observable = ipywidgets.Dropdown(
            description="show",
            options=[(item.axis_label, item) for item in OWN],
            value=next((o for o in OWN if "mass" in o.name), OWN[0]),
            style={"description_width": "4em"},
            layout=ipywidgets.Layout(width="24em"),
        )
        self.observable.observe(lambda _: self.redraw(), names="value")
        self.picture = Picture()
        self.text = ipywidgets.HTML()
        self.settings = OptionControls(self, plan.boosted, "boosted")
        self.tag = OptionControls(self, plan.boosted.tag, "boosted.tag")
        self.grooming = OptionControls(
            self, plan.boosted.substructure, "boosted.substructure"
        )
        note = []
        if not self.live.can_reconstruct:
            for controls in (self.settings, self.tag, self.grooming):
                controls.disable()
            self.branch.disabled = True
            note = [
                helping("fixed: the study runs on a saved event table, without events")
            ]
        return [
            ipywidgets.HBox([self.branch, self.observable]),
            self.text,
            self.picture.widget,
            *note,
            labelled("Fat jets"),
            self.settings.widget,
            labelled("Tag"),
            self.tag.widget,
            labelled("Grooming and substructure"),
            self.grooming.widget,
        ]

    def paint(self) -> None:
        """Draw the observable chosen, by class."""
        plan = self.live.plan
        self.settings.follow(plan.boosted)
        self.tag.follow(plan.boosted.tag)
        self.grooming.follow(plan.boosted.substructure)
        if self.branch.value is not plan.study.branch:
            self._quiet = True
            self.branch.value = plan.study.branch
            self._quiet = False
        observable = self.observable.value
        there = observable.name in self.live.table
        self.picture.widget.layout.display = None if there else "none"
        text = "" if there else "Choose a branch with fat jets to see them here."
        self.text.value = f'<p class="toprecon-status">{text}</p>' if text else ""
        if not there or not self.live.is_settled:
            return
        binning = Binning.regular(BINS, *observable.range)
        classes = self.live.distribution(
            observable.name, binning, beams=self.shared.beams.value
        )
        limits = {cut.observable: (cut.low, cut.high) for cut in plan.active_cuts}
        low, high = limits.get(observable.name, (None, None))
        figure = figures.CutFigure(observable, binning, caption=self.shared.caption)
        figure.update(classes, low=low, high=high)
        self.picture.show(figure)

    def python(self) -> str:
        """Return Python that gives what is shown."""
        observable = self.observable.value
        low, high = observable.range
        return (
            "from toprecon.study import Binning, LiveStudy\n\n"
            "live = LiveStudy(source, plan, synchronous=True)\n"
            f"bins = Binning.regular({BINS}, {low:g}, {high:g})\n"
            f'live.distribution("{observable.name}", bins)'
        )

    def _choose(self, branch: BranchChoice) -> None:
        if self._quiet:
            return
        with self.errors.guard():
            self.live.set_settings({"study.branch": branch.value})
