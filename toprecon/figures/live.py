"""Figures that follow a slider: kept, and redrawn only where they change.

Most of the time of a drawing goes into ticks and their labels, which do not move. A
:class:`LiveFigure` keeps its artists and the pixels of everything at rest; a new frame
restores those pixels and draws the moving artists over them. The result is the same
picture, pixel by pixel, as a full drawing.
"""

from __future__ import annotations

import io
from collections.abc import Hashable
from typing import Any

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from numpy.typing import NDArray

from toprecon.figures.style import DPI, PAPER, Drawing

LADDER = (1.0, 1.5, 2.0, 3.0, 4.0, 5.0, 6.0, 8.0, 10.0)
"""Ends of an axis, times a power of ten."""

ROOM = 2.2
"""An axis is kept as long as the data fit and it is less than this much too long."""


class LiveFigure:
    """A figure with artists that stay.

    Parameters
    ----------
    size : tuple of float
        Width and height [inch].
    dpi : int
        Dots per inch.
    """

    def __init__(self, size: tuple[float, float], *, dpi: int = DPI) -> None:
        self.figure = Drawing(figsize=size, dpi=dpi, facecolor=PAPER)
        self._canvas = FigureCanvasAgg(self.figure)
        self._resting: set[Any] = set()
        self._rest: Any = None
        self._rest_key: Hashable = None
        # texts live in axes of their own: artists of the figure cannot move
        self.overlay = self.figure.add_axes((0, 0, 1, 1), zorder=5)
        self.overlay.set_axis_off()
        self.overlay.patch.set_alpha(0)
        self.overlay.set(xlim=(0, 1), ylim=(0, 1))

    def text(
        self, x: float, y: float, text: str, *, moves: bool = False, **look: Any
    ) -> Any:
        """Write at a place in the figure, both coordinates from 0 to 1."""
        look = {"va": "center", "fontsize": 9, **look}
        item = self.overlay.text(x, y, text, **look)
        if not moves:
            self.rests(item)
        return item

    def rests(self, *artists: Any) -> None:
        """Declare that artists never change and nothing that moves crosses them."""
        self._resting.update(artists)

    def png(self) -> bytes:
        """Return the present frame as a PNG picture.

        Returns
        -------
        bytes
            The file.
        """
        from PIL import Image

        self._draw()
        size = self._canvas.get_width_height()
        raw = self._canvas.buffer_rgba()
        picture = Image.frombuffer("RGBA", size, raw, "raw", "RGBA", 0, 1).convert(
            "RGB"
        )
        stream = io.BytesIO()
        picture.save(stream, format="png", compress_level=1)
        return stream.getvalue()

    def pixels(self) -> NDArray[np.uint8]:
        """Return the frame drawn last, shape (height, width, 4)."""
        return np.asarray(self._canvas.buffer_rgba())

    def _draw(self) -> None:
        """Draw what is at rest if that has changed, then what moves."""
        moving = [(axes, self._moving(axes)) for axes in self.figure.axes]
        for _, artists in moving:
            for artist in artists:
                artist.set_animated(True)
        key = tuple(
            (axes.get_xlim(), axes.get_ylim(), axes.get_xlabel(), axes.get_ylabel())
            for axes, _ in moving
        )
        if self._rest is None or key != self._rest_key:
            self._canvas.draw()
            self._rest = self._canvas.copy_from_bbox(self.figure.bbox)
            self._rest_key = key
        else:
            self._canvas.restore_region(self._rest)
        for axes, artists in sorted(moving, key=lambda item: item[0].get_zorder()):
            for artist in artists:
                axes.draw_artist(artist)

    def _moving(self, axes: Any) -> list[Any]:
        """Everything in axes but ticks, labels, paper and what never changes."""
        still = self._resting | {axes.xaxis, axes.yaxis, axes.patch}
        if not axes.axison:
            still |= set(axes.spines.values())
        artists = [a for a in axes.get_children() if a not in still and a.get_visible()]
        return sorted(artists, key=lambda artist: artist.get_zorder())


def top_of_axis(highest: float, present: float) -> float:
    """Return the end of an axis that starts at 0.

    Parameters
    ----------
    highest : float
        What has to fit.
    present : float
        The end it has now; kept if that is not far too long.

    Returns
    -------
    float
        A round number, so that the axis rarely changes.
    """
    needed = max(highest * 1.05, 1e-9)
    if needed <= present < ROOM * needed:
        return present
    power = 10.0 ** np.floor(np.log10(needed))
    return float(next(step * power for step in LADDER if step * power >= needed))
