"""Parts that every panel is made of: errors in one line, pictures, small texts."""

from __future__ import annotations

import contextlib
import html
import os
from collections.abc import Callable, Iterator
from typing import Any

import ipywidgets
from matplotlib.figure import Figure

from toprecon.errors import TopreconError
from toprecon.figures import LiveFigure, png
from toprecon.study import LiveStudy, StudyPlan

STRICT_VARIABLE = "TOPRECON_STRICT"
"""Set to 1 in tests: errors of callbacks are raised as well as shown."""

STYLE = """<style>
.noUi-handle:focus {outline: 2px solid #0072b2; outline-offset: 1px}
.toprecon-title {font-weight: 600; margin: 2px 0; line-height: 1.4}
.toprecon-status {margin: 2px 0; line-height: 1.4}
.toprecon-error {background: #fdf1e7; color: #7a2e00; margin: 2px 0; padding: 2px 8px;
  border-left: 3px solid #d55e00; line-height: 1.4}
.toprecon-help {opacity: 0.75; font-size: 90%; line-height: 1.35}
.toprecon-table td, .toprecon-table th {padding: 1px 12px 1px 0; text-align: left}
.toprecon-dense {font-size: 12px; line-height: 1.5}
.toprecon-dense td {white-space: nowrap}
.toprecon-dense th {vertical-align: bottom}
.toprecon pre {line-height: 1.35; margin: 4px 0; white-space: pre-wrap}
</style>"""


class ErrorLine:
    """Where errors appear: one sentence, announced to screen readers.

    Parameters
    ----------
    live : LiveStudy
        The study whose plan the errors are about.
    """

    def __init__(self, live: LiveStudy) -> None:
        self._live = live
        self._text = ""
        self._plan: StudyPlan | None = None
        self.widget = ipywidgets.HTML()
        self.strict = os.environ.get(STRICT_VARIABLE) == "1"

    @property
    def text(self) -> str:
        """The message shown; empty if there is none."""
        return self._text

    def show(self, message: str) -> None:
        """Show a message; an empty one clears the line."""
        self._plan = self._live.plan
        if message == self._text:
            return
        self._text = message
        self.widget.value = (
            f'<p class="toprecon-error" role="alert">{html.escape(message)}</p>'
            if message
            else ""
        )

    def forget_with_any_result(self) -> None:
        """Let the next result clear the message, also one of the same plan."""
        self._plan = None

    def outlived(self, plan: StudyPlan) -> None:
        """Forget the message once a plan newer than it has its result."""
        if plan is not self._plan:
            self.show("")

    def show_error(self, error: Exception) -> None:
        """Show an error in one sentence; other people's errors with their type."""
        known = isinstance(error, TopreconError)
        self.show(str(error) if known else f"{type(error).__name__}: {error}")

    @contextlib.contextmanager
    def guard(self) -> Iterator[None]:
        """Show what goes wrong inside; raise what nobody foresaw in strict mode."""
        try:
            yield
        except Exception as error:
            self.show_error(error)
            if self.strict and not isinstance(error, TopreconError):
                raise


class Picture:
    """One figure in one image widget of fixed width.

    Parameters
    ----------
    width : int
        Width on the screen [px]; the height follows from the figure.
    """

    def __init__(self, width: int = 720) -> None:
        self._width = width
        self._kept: dict[str, Figure] = {}
        self.widget = ipywidgets.Image(
            format="png",
            layout=ipywidgets.Layout(
                width=f"{width}px", max_width="100%", object_fit="contain"
            ),
        )

    def draw(self, name: str, make: Callable[[Figure | None], Figure]) -> None:
        """Draw a figure, again into the one kept under its name, and show it."""
        self._kept[name] = figure = make(self._kept.get(name))
        self.widget.value = png(figure)

    def show(self, live: LiveFigure) -> None:
        """Show the present frame of a figure that follows a control."""
        self.widget.value = live.png()


def spelled(name: str) -> str:
    """Return the name of a setting in words, particles as they are written."""
    words = {"w": "W", "isr": "ISR", "afb": "A_FB"}
    return " ".join(words.get(word, word) for word in name.split("_"))


def labelled(text: str) -> Any:
    """Return a heading of a group of controls."""
    return ipywidgets.HTML(f'<div class="toprecon-title">{html.escape(text)}</div>')


def said(text: str) -> str:
    """Return a sentence in HTML; nothing for no text."""
    return f'<p class="toprecon-status">{html.escape(text)}</p>' if text else ""


def helping(text: str) -> Any:
    """Return one line of help."""
    return ipywidgets.HTML(f'<div class="toprecon-help">{html.escape(text)}</div>')


def close_all(widget: Any) -> None:
    """Close a widget with its children, layout and style, so that nothing stays."""
    for child in getattr(widget, "children", ()):
        close_all(child)
    for part in ("layout", "style"):
        owned = getattr(widget, part, None)
        if isinstance(owned, ipywidgets.Widget):
            owned.close()
    widget.close()
