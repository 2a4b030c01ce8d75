"""Compare: the present plan with one that was kept, on the same events."""

from __future__ import annotations

import html
from typing import Any

import ipywidgets

from toprecon import figures
from toprecon.study import EventTable, StudyPlan, compare_plans
from toprecon.widgets.base import Panel
from toprecon.widgets.parts import Picture, helping


class ComparePanel(Panel):
    """Differences between a kept plan and the present one, with paired errors."""

    title = "Compare"

    def build(self) -> list[Any]:
        """Make the widgets, top to bottom."""
        self.keep = ipywidgets.Button(
            description="keep this plan",
            tooltip="compare all later plans with the present one",
            layout=ipywidgets.Layout(width="10em"),
        )
        self.keep.on_click(lambda _: self._keep())
        self.back = ipywidgets.Button(
            description="go back to it",
            tooltip="take the kept plan as the present one",
            disabled=True,
            layout=ipywidgets.Layout(width="10em"),
        )
        self.back.on_click(lambda _: self._back())
        self.kept: tuple[EventTable, StudyPlan] | None = None
        self.picture = Picture()
        self.text = ipywidgets.HTML()
        return [
            ipywidgets.HBox([self.keep, self.back]),
            helping("the errors of the differences are paired: shared fluctuations "
                    "drop out"),
            self.picture.widget,
            self.text,
        ]  # fmt: skip

    def paint(self) -> None:
        """Compare, once the study has settled."""
        if self.kept is None:
            self.text.value = (
                '<p class="toprecon-status">Keep the present plan, then change '
                "anything: the differences appear here.</p>"
            )
            return
        if not self.live.is_settled:
            return
        table, plan = self.kept
        comparison = compare_plans(
            (table, self.live.table),
            plan,
            self.live.plan,
            beams=self.shared.beams.value,
        )
        caption = self.shared.caption
        self.picture.draw(
            "comparison",
            lambda figure: figures.comparison_figure(
                comparison, names=("kept", "now"), caption=caption, figure=figure
            ),
        )
        both = comparison.selected_both
        moved = f"{comparison.moved}".replace("+-", "±")
        self.text.value = (
            f'<p class="toprecon-status" role="status">{both:,} events selected by '
            f"both, {comparison.selected_first:,} by the kept plan only, "
            f"{comparison.selected_second:,} by the present one only; of those of both "
            f"{moved} change the hemisphere.</p><pre>kept: "
            f"{html.escape(plan.as_code())}\nnow:  "
            f"{html.escape(self.live.plan.as_code())}</pre>"
        )

    def python(self) -> str:
        """Return Python that gives what is shown."""
        if self.kept is None:
            return "kept = plan"
        return (
            "from toprecon.study import compare_plans\n\n"
            f"kept = {self.kept[1].as_code()}\n"
            f'compare_plans(source, kept, plan, beams="{self.shared.beams.value}")'
        )

    def _keep(self) -> None:
        with self.errors.guard():
            self.live.wait()
            self.kept = self.live.snapshot()
            self.back.disabled = False
        self.redraw()

    def _back(self) -> None:
        with self.errors.guard():
            if self.kept is not None:
                self.live.set_plan(self.kept[1])
