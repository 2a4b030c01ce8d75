"""What every part of the desk shares: errors in one line, pictures, and an end."""

from __future__ import annotations

import contextlib
import html
import os
from collections.abc import Callable, Iterator
from typing import Any

import ipywidgets
from matplotlib.figure import Figure

from toprecon.errors import TopreconError
from toprecon.figures import png

STRICT_VARIABLE = "TOPRECON_STRICT"
"""Set to 1 in tests: errors of callbacks are raised as well as shown."""

STYLE = """<style>
.noUi-handle:focus {outline: 2px solid #0072b2}
.toprecon-title {font-weight: 600; margin: 4px 0}
.toprecon-status {color: #22262b; margin: 2px 0; line-height: 1.35}
.toprecon-error {color: #8a2a00; margin: 2px 0}
.toprecon-help {color: #5c636a; font-size: 90%; line-height: 1.3}
</style>"""


class ErrorLine:
    """Where errors appear: one sentence, announced to screen readers."""

    def __init__(self) -> None:
        self.widget = ipywidgets.HTML()
        self.strict = os.environ.get(STRICT_VARIABLE) == "1"

    def show(self, message: str) -> None:
        """Show a message; an empty one clears the line."""
        text = html.escape(message)
        self.widget.value = (
            f'<p class="toprecon-error" role="alert">{text}</p>' if text else ""
        )

    @contextlib.contextmanager
    def guard(self) -> Iterator[None]:
        """Show what goes wrong inside; raise it too in strict mode."""
        try:
            yield
        except TopreconError as error:
            self.show(str(error))
        except Exception as error:
            self.show(f"{type(error).__name__}: {error}")
            if self.strict:
                raise


class Picture:
    """One figure in one image widget of fixed width."""

    def __init__(self, width: int = 720) -> None:
        self.figure: Figure | None = None
        self.widget = ipywidgets.Image(
            format="png", layout=ipywidgets.Layout(max_width=f"{width}px")
        )

    def draw(self, make: Callable[[Figure | None], Figure]) -> None:
        """Draw into the same figure again and send the picture."""
        self.figure = make(self.figure)
        self.widget.value = png(self.figure)


def labelled(text: str) -> Any:
    """Return a heading of a group of controls."""
    return ipywidgets.HTML(f'<div class="toprecon-title">{html.escape(text)}</div>')


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
