"""Where in the angle the hemisphere is reconstructed wrongly."""

from __future__ import annotations

import numpy as np
from matplotlib.figure import Figure

from toprecon.asymmetry import AsymmetryResult
from toprecon.figures import style


def flip_figure(
    result: AsymmetryResult, *, caption: str = "", figure: Figure | None = None
) -> Figure:
    """Draw the fraction of flipped events per bin of |cos(theta)|.

    Parameters
    ----------
    result : AsymmetryResult
        For one setting of the beams.
    caption : str
        Small print: what the numbers rest on.
    figure : Figure, optional
        Figure to draw into again.

    Returns
    -------
    Figure
        One point per bin of the generated angle; the heading gives the flip
        probabilities of both hemispheres.
    """
    figure = style.blank(figure, (7.2, 2.8))
    axes = figure.add_axes((0.105, 0.235, 0.87, 0.62))
    binning = result.flip_bins
    values = np.array([m.value for m in result.flip_fractions])
    errors = np.array([m.error for m in result.flip_fractions])
    axes.errorbar(
        binning.centres, values, errors, 0.5 * binning.widths, fmt="o",
        color=style.RECONSTRUCTED["color"], markersize=4,
    )  # fmt: skip
    axes.set_xlim(0, 1)
    axes.set_ylim(0, max(0.05, 1.15 * float(np.nanmax(values + errors, initial=0.01))))
    axes.set_xlabel("generated |cos θ|")
    axes.set_ylabel("share in the wrong one")
    f = result.flips
    style.tidy(axes)
    style.heading(
        axes,
        f"wrong hemisphere: forward tops {style.pm(f.forward_to_backward)}, "
        f"backward {style.pm(f.backward_to_forward)}",
    )
    style.small_print(figure, caption)
    return figure
