"""Figures that follow a slider give the pixels of a full drawing."""

from __future__ import annotations

import io

import numpy as np
import pytest
from matplotlib.image import imread

from toprecon.figures import AngleFigure, CutFigure
from toprecon.figures.live import top_of_axis
from toprecon.study import OBSERVABLES, Binning

CHI2 = next(item for item in OBSERVABLES if item.name == "pairing.chi2")
BINS = Binning.regular(40, 0, 50)


def full_drawing(live_figure):
    """Pixels of a drawing from nothing, as it is saved."""
    figure, stream = live_figure.figure, io.BytesIO()
    figure.savefig(stream, format="rgba", dpi=figure.dpi)
    height, width, _ = live_figure.pixels().shape
    return np.frombuffer(stream.getvalue(), np.uint8).reshape(height, width, 4)


def frame(live_figure):
    live_figure.png()
    return live_figure.pixels().copy()


@pytest.mark.parametrize(
    "variants",
    [
        ("generated", "reconstructed"),
        ("generated", "closest", "chosen", "reconstructed_signal", "reconstructed"),
    ],
)
def test_angle_frame_equals_the_full_drawing(beams, live, variants):
    figure = AngleFigure(variants, caption="small print")
    figure.update(beams.asymmetry)
    frame(figure)
    live.set_cut("pairing.chi2", high=6)
    figure.update(live.result.by_helicity["LR"].asymmetry)
    moved = frame(figure)
    live.set_cut("pairing.chi2", high=40)
    assert np.array_equal(moved, full_drawing(figure))


@pytest.mark.parametrize("with_axes", [True, False])
def test_cut_frame_equals_the_full_drawing(live, with_axes):
    figure = CutFigure(CHI2, BINS, with_axes=with_axes)
    figure.update(live.distribution("pairing.chi2", BINS), low=1, high=40)
    frame(figure)
    figure.move(2.5, 17)
    assert np.array_equal(frame(figure), full_drawing(figure))


def test_moved_limit_changes_the_frame_and_back_gives_the_same_pixels(live):
    figure = CutFigure(CHI2, BINS)
    figure.update(live.distribution("pairing.chi2", BINS), high=40)
    first = frame(figure)
    figure.move(None, 20)
    assert not np.array_equal(frame(figure), first)
    figure.move(None, 40)
    assert np.array_equal(frame(figure), first)


def test_png_holds_the_pixels_of_the_frame(beams):
    figure = AngleFigure()
    figure.update(beams.asymmetry)
    picture = imread(io.BytesIO(figure.png()), format="png")
    assert np.array_equal(
        np.rint(picture * 255).astype(np.uint8), figure.pixels()[:, :, :3]
    )


def test_axis_is_kept_while_the_data_fit_and_it_is_not_far_too_long():
    assert top_of_axis(90, 0) == 100
    assert top_of_axis(99, 100) == 150
    assert top_of_axis(50, 100) == 100  # fits, less than 2.2 times too long
    assert top_of_axis(20, 100) == 30
    assert top_of_axis(0, 0) > 0


def test_no_figure_is_left_in_pyplot(beams):
    import matplotlib.pyplot as plt

    figure = AngleFigure()
    figure.update(beams.asymmetry)
    figure.png()
    assert plt.get_fignums() == []
