"""Boosted: when to stop pairing jets and take the top as one fat jet."""

from __future__ import annotations

from typing import Any

import ipywidgets

from toprecon import figures
from toprecon.study import (
    OBSERVABLES,
    Binning,
    BranchChoice,
    BranchComparison,
    TagQuality,
    apply_cuts,
    branch_plan,
    compare_branches,
    tag_quality,
)
from toprecon.widgets.base import Panel
from toprecon.widgets.controls import OptionControls
from toprecon.widgets.parts import Picture, helping, labelled, said

BINS = 60
OWN = [item for item in OBSERVABLES if item.name.startswith("boosted.")]
MASSES, OBSERVABLE, BRANCHES, TAG = "masses", "observable", "branches", "tag"
SECTIONS = ("Fat jets", "Tag", "Grooming and substructure")


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
        self.take = ipywidgets.Button(
            description="fat jets with a tag",
            tooltip="boosted branch, nothing asked of single jets, every top tagged",
            layout=ipywidgets.Layout(width="12em"),
        )
        self.take.on_click(lambda _: self._take())
        self._quiet = False
        self.view = ipywidgets.ToggleButtons(
            options=[MASSES, OBSERVABLE, BRANCHES, TAG],
            value=MASSES,
            style={"button_width": "9em"},
        )
        self.observable = ipywidgets.Dropdown(
            description="show",
            options=[(item.axis_label, item) for item in OWN],
            value=next((o for o in OWN if "mass" in o.name), OWN[0]),
            style={"description_width": "4em"},
            layout=ipywidgets.Layout(width="24em"),
        )
        for item in (self.view, self.observable):
            item.observe(lambda _: self.redraw(), names="value")
        self.picture = Picture()
        self.text = ipywidgets.HTML()
        self.start = ipywidgets.Button(layout=ipywidgets.Layout(width="20em"))
        self.start.on_click(lambda _: self._start())
        self._branches: BranchComparison | None = None
        self._quality: TagQuality | None = None
        self.settings = OptionControls(self, plan.boosted, "boosted")
        self.tag = OptionControls(self, plan.boosted.tag, "boosted.tag")
        self.grooming = OptionControls(
            self, plan.boosted.substructure, "boosted.substructure"
        )
        note = []
        if not self.live.can_reconstruct:
            for controls in (self.settings, self.tag, self.grooming):
                controls.disable()
            for item in (self.branch, self.take, self.start):
                item.disabled = True
            note = [
                helping("fixed: the study runs on a saved event table, without events")
            ]
        self.sections = ipywidgets.Accordion(
            children=[self.settings.widget, self.tag.widget, self.grooming.widget],
            titles=SECTIONS,
        )
        return [
            ipywidgets.HBox([self.branch, self.take]),
            self.view,
            self.observable,
            self.start,
            self.text,
            self.picture.widget,
            labelled("Settings"),
            *note,
            self.sections,
        ]

    def paint(self) -> None:
        """Draw the view chosen."""
        plan, view = self.live.plan, self.view.value
        self.settings.follow(plan.boosted)
        self.tag.follow(plan.boosted.tag)
        self.grooming.follow(plan.boosted.substructure)
        if self.branch.value is not plan.study.branch:
            self._quiet = True
            self.branch.value = plan.study.branch
            self._quiet = False
        _show(self.observable, view == OBSERVABLE)
        _show(self.start, view in {BRANCHES, TAG})
        if view in {BRANCHES, TAG}:
            self._paint_work(view)
            return
        name = self.observable.value.name if view == OBSERVABLE else "boosted.mass"
        there = name in self.live.table
        _show(self.picture.widget, there)
        self._say("" if there else "Choose a branch with fat jets to see them here.")
        if not there or not self.live.is_settled:
            return
        if view == MASSES:
            table = self.live.table
            kept = apply_cuts(
                table, (self.live.shown_plan or plan).without_cuts_on("boosted.")
            )
            self._say(
                "Events that pass the selection and the cuts, those on fat jets "
                "excepted; all samples, generator weights."
            )
            self.picture.draw(
                view,
                lambda figure: figures.fat_jet_figure(
                    table,
                    weight=table["weight"] * kept.selected,
                    caption=self.shared.caption,
                    figure=figure,
                ),
            )
            return
        observable = self.observable.value
        binning = Binning.regular(BINS, *observable.range)
        classes = self.live.distribution(
            observable.name, binning, beams=self.shared.beams.value
        )
        limits = {cut.observable: (cut.low, cut.high) for cut in plan.active_cuts}
        low, high = limits.get(observable.name, (None, None))
        cut_figure = figures.CutFigure(observable, binning, caption=self.shared.caption)
        cut_figure.update(classes, low=low, high=high)
        self.picture.show(cut_figure)

    def python(self) -> str:
        """Return Python that gives what is shown."""
        view = self.view.value
        if view == BRANCHES:
            return (
                "from toprecon.study import compare_branches\n\n"
                "print(compare_branches(source, plan))"
            )
        if view == TAG:
            return (
                "from toprecon.study import tag_quality\n\n"
                "print(tag_quality(source, plan))"
            )
        if view == MASSES:
            return (
                "from toprecon.figures import fat_jet_figure\n"
                "from toprecon.study import apply_cuts, reconstruct_source\n\n"
                "table = reconstruct_source(source, plan)\n"
                'kept = apply_cuts(table, plan.without_cuts_on("boosted."))\n'
                'fat_jet_figure(table, weight=table["weight"] * kept.selected)'
            )
        observable = self.observable.value
        low, high = observable.range
        return (
            "from toprecon.study import Binning, LiveStudy\n\n"
            "live = LiveStudy(source, plan, synchronous=True)\n"
            f"bins = Binning.regular({BINS}, {low:g}, {high:g})\n"
            f'live.distribution("{observable.name}", bins)'
        )

    def _paint_work(self, view: str) -> None:
        """Show the outcome of long work, or say how to start it."""
        found = self._branches if view == BRANCHES else self._quality
        words = "compare the branches" if view == BRANCHES else "measure the tag"
        self.start.description = words
        _show(self.picture.widget, found is not None)
        caption = self.shared.caption
        if isinstance(found, BranchComparison):
            rows = found.rows
            self._say(
                "Both branches on the same events, with the settings of the time the "
                "button was pressed. Can be right: every quark has a jet of its own, or "
                "all quarks of the hadronic top are inside its fat jet."
            )
            self.picture.draw(
                view,
                lambda figure: figures.branch_figure(
                    rows, caption=caption, figure=figure
                ),
            )
        elif isinstance(found, TagQuality):
            curve, cuts = found.curve, found.cuts
            self._say(str(found).replace("+-", "±"))
            self.picture.draw(
                view,
                lambda figure: figures.tag_figure(
                    curve, cuts, caption=caption, figure=figure
                ),
            )
        elif view == BRANCHES:
            self._say(
                "Reconstructs all events twice: pairs of jets without the cuts on fat "
                "jets, and tagged fat jets."
            )
        else:
            self._say(
                "Fat jets of the top pairs against those of the other samples: give the "
                "study a background with particles as well."
            )

    def _say(self, text: str) -> None:
        self.text.value = said(text)

    def _start(self) -> None:
        """Do what the view shows, in the worker."""
        source, plan = self.live.source, self.live.plan
        if self.view.value == BRANCHES:
            self.run_for(
                self.start,
                "comparing the branches",
                lambda report: compare_branches(source, plan, progress=report),
                lambda found: self._keep(branches=found),
            )
        else:
            self.run_for(
                self.start,
                "measuring the tag",
                lambda report: tag_quality(source, plan, progress=report),
                lambda found: self._keep(quality=found),
            )

    def _keep(
        self,
        branches: BranchComparison | None = None,
        quality: TagQuality | None = None,
    ) -> None:
        self._branches = branches or self._branches
        self._quality = quality or self._quality
        self.redraw()

    def _take(self) -> None:
        with self.errors.guard():
            self.live.set_plan(branch_plan(self.live.plan, BranchChoice.BOOSTED.value))

    def _choose(self, branch: BranchChoice) -> None:
        if self._quiet:
            return
        with self.errors.guard():
            self.live.set_settings({"study.branch": branch.value})


def _show(widget: Any, visible: bool) -> None:
    """Show or hide a widget."""
    widget.layout.display = None if visible else "none"
