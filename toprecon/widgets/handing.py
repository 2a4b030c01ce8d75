"""Hand-off: the plan as a file, and the folder for whoever unfolds."""

from __future__ import annotations

import html
from typing import Any

import ipywidgets

from toprecon.widgets.base import Panel
from toprecon.widgets.controls import OptionControls
from toprecon.widgets.parts import helping, labelled


class HandOffPanel(Panel):
    """Beams and luminosity of the expected data, the plan file, the hand-off folder."""

    title = "Hand-off"

    def build(self) -> list[Any]:
        """Make the widgets, top to bottom."""
        wide = {"layout": ipywidgets.Layout(width="24em")}
        look = {"style": {"description_width": "5em"}, **wide}
        self.settings = OptionControls(self, self.live.plan.beams, "beams")
        self.plan_file = ipywidgets.Text(
            value="study_plan.toml", description="plan file", **look
        )
        self.save = ipywidgets.Button(
            description="save plan", tooltip="write every setting to the plan file"
        )
        self.save.on_click(lambda _: self._save())
        self.folder = ipywidgets.Text(
            value="hand_off",
            description="folder",
            style={"description_width": "5em"},
            layout=ipywidgets.Layout(width="24em"),
        )
        self.write = ipywidgets.Button(
            description="write hand-off",
            tooltip="matrix in open formats, plan and provenance; complete or absent",
        )
        self.write.on_click(lambda _: self._hand_off())
        self.done = ipywidgets.HTML()
        self.plan_text = ipywidgets.HTML()
        return [
            labelled("Beams and luminosity of the expected data"),
            self.settings.widget,
            labelled("Keep"),
            ipywidgets.HBox([self.plan_file, self.save]),
            helping("the same plan runs over all events: toprecon study --plan FILE"),
            ipywidgets.HBox([self.folder, self.write]),
            helping("migration matrix with variances, efficiency, plan, provenance"),
            self.done,
            self.plan_text,
        ]

    def paint(self) -> None:
        """Show the plan and what the numbers rest on."""
        self.settings.follow(self.live.plan.beams)
        if not self.live.is_settled:
            return
        result = self.live.result
        cautions = "".join(f"<li>{html.escape(text)}</li>" for text in result.cautions)
        self.plan_text.value = (
            f'<ul class="toprecon-help">{cautions}</ul><details><summary>the plan'
            f"</summary><pre>{html.escape(self.live.plan.to_toml())}</pre></details>"
        )

    def python(self) -> str:
        """Return Python that gives what is shown."""
        return (
            f'plan.save("{self.plan_file.value}")\n'
            f'result.hand_off("{self.folder.value}")'
        )

    def _save(self) -> None:
        with self.errors.guard():
            path = self.live.plan.save(self.plan_file.value)
            self._tell(f"plan saved as {path}")

    def _hand_off(self) -> None:
        with self.errors.guard():
            folder = self.live.wait().hand_off(self.folder.value)
            self._tell(f"hand-off written to {folder}")

    def _tell(self, text: str) -> None:
        self.errors.show("")
        self.done.value = (
            f'<p class="toprecon-status" role="status">{html.escape(text)}</p>'
        )
