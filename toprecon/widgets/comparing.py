"""Compare: the present plan with one that was kept, on the same events."""

from __future__ import annotations

import html
from typing import Any

import ipywidgets

from toprecon import figures
from toprecon.study import (
    EventTable,
    StudyPlan,
    VariationShifts,
    compare_plans,
    variation_shifts,
)
from toprecon.widgets.base import Panel
from toprecon.widgets.parts import Picture, helping, said

KEPT, VARIED = "with a kept plan", "with variations"
COLUMNS = {
    "efficiency": "efficiency",
    "generated_selected": "A_FB generated, selected",
    "reconstructed": "A_FB reconstructed",
    "shift": "shift of the signal",
}


class ComparePanel(Panel):
    """Differences to a kept plan or to a varied input, with paired errors."""

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
        self.view = ipywidgets.ToggleButtons(
            options=[KEPT, VARIED], value=KEPT, style={"button_width": "12.5em"}
        )
        self.view.observe(lambda _: self.redraw(), names="value")
        self.vary = ipywidgets.Button(
            description="vary the input",
            tooltip="reconstructs all events once per variation",
            disabled=not self.live.can_reconstruct,
            layout=ipywidgets.Layout(width="10em"),
        )
        self.vary.on_click(lambda _: self._vary())
        self._shifts: tuple[StudyPlan, str, VariationShifts] | None = None
        self.buttons = ipywidgets.HBox([self.keep, self.back])
        self.picture = Picture()
        self.text = ipywidgets.HTML()
        return [
            self.view,
            self.buttons,
            self.vary,
            helping("the errors of the differences are paired: shared fluctuations "
                    "drop out"),
            self.picture.widget,
            self.text,
        ]  # fmt: skip

    def paint(self) -> None:
        """Compare, once the study has settled."""
        is_kept = self.view.value == KEPT
        self.buttons.layout.display = None if is_kept else "none"
        self.vary.layout.display = "none" if is_kept else None
        drawn = is_kept and self.kept is not None
        self.picture.widget.layout.display = None if drawn else "none"
        if not is_kept:
            self._paint_shifts()
            return
        if self.kept is None:
            self.text.value = said(
                "Keep the present plan, then change anything: the differences appear "
                "here."
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
        share = f"{comparison.moved}".replace("+-", "±")
        moved = f"{share} change" if comparison.moved.value else "none changes"
        self.text.value = (
            f'<p class="toprecon-status" role="status">{both:,} events selected by '
            f"both, {comparison.selected_first:,} by the kept plan only, "
            f"{comparison.selected_second:,} by the present one only; of those of both "
            f"{moved} the hemisphere.</p><pre>kept: "
            f"{html.escape(plan.as_code())}\nnow:  "
            f"{html.escape(self.live.plan.as_code())}</pre>"
        )

    def python(self) -> str:
        """Return Python that gives what is shown."""
        if self.view.value == VARIED:
            return (
                "from toprecon.study import variation_shifts\n\n"
                f'print(variation_shifts(source, plan, beams="{self.shared.beams.value}"))'
            )
        if self.kept is None:
            return "kept = plan"
        return (
            "from toprecon.study import compare_plans\n\n"
            f"kept = {self.kept[1].as_code()}\n"
            f'compare_plans(source, kept, plan, beams="{self.shared.beams.value}")'
        )

    def _paint_shifts(self) -> None:
        """Show the table of variations, or say how to get it."""
        if not self.live.can_reconstruct:
            self.text.value = said(
                "Varying the input needs the events, but this desk was given a table: "
                "open it with the event files."
            )
            return
        if self._shifts is None:
            self.text.value = said(
                "Other jet and lepton energies, resolution, b tags and assumed masses, "
                "of round sizes: how much would the results shift?"
            )
            return
        plan, beams, shifts = self._shifts
        head = "".join(f"<th>{html.escape(text)}</th>" for text in COLUMNS.values())
        rows = "".join(
            f"<tr><td>{html.escape(name)}</td>"
            + "".join(f"<td>{_signed(found[q].difference)}</td>" for q in COLUMNS)
            + "</tr>"
            for name, found in shifts.items()
        )
        now = plan == self.live.plan and beams == self.shared.beams.value
        note = "" if now else "; made with an earlier plan or other beams"
        self.text.value = (
            '<table class="toprecon-table toprecon-dense"><tr><th>varied minus nominal'
            f'</th>{head}</tr>{rows}</table><div class="toprecon-help">paired '
            "statistical errors; the sizes of the variations are round numbers, not "
            f"uncertainties{note}</div>"
        )

    def _vary(self) -> None:
        """Carry out the variations in the worker."""
        source, plan = self.live.source, self.live.plan
        beams = self.shared.beams.value

        def then(found: VariationShifts) -> None:
            self._shifts = (plan, beams, found)
            self.redraw()

        self.run_for(
            self.vary,
            "varying",
            lambda report: variation_shifts(source, plan, beams=beams, progress=report),
            then,
            unit="reconstructions",
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


def _signed(number: Any) -> str:
    """Return a difference with its sign, for people."""
    if number.value == 0 and number.error == 0:
        return "0"
    text = f"{number}".replace("+-", "±").replace("-", "−")
    return f"+{text}" if number.value > 0 else text
