"""Figures of the data-like view."""

from __future__ import annotations

import numpy as np

from toprecon.events import Binning, Observable
from toprecon.figures import data_like_figure, png, tail_figure

SCORE = Observable("pairing.chi2", "", "score", (0, 10), "score")
BINS = Binning.regular(5, 0, 10)


def labels_of(axes):
    return [text.get_text() for text in axes.get_legend().get_texts()]


def test_processes_are_stacked_with_the_largest_on_top():
    stack = {"pairs": np.full(5, 100.0), "ww": np.full(5, 10.0)}
    figure = data_like_figure(
        SCORE, BINS, stack, stack, outside=110.0, is_expected=True, high=4.0
    )
    axes, below = figure.axes
    labels = labels_of(axes)
    assert labels.index("pairs") < labels.index("ww")
    assert "(16.7 % outside)" in labels
    assert "data expected" in labels
    assert axes.get_ylabel() == "expected events per 2"
    tops = [p.get_data().values[0] for p in axes.patches[:2]]
    assert tops == [10, 110]
    assert below.get_ylim()[1] == 1.25 * np.sqrt(110) / 110
    assert png(figure)


def test_without_luminosity_no_data_are_drawn_and_empty_bins_are_no_trouble():
    nothing = {"pairs": np.zeros(5)}
    figure = data_like_figure(SCORE, BINS, nothing, nothing)
    assert "data expected" not in labels_of(figure.axes[0])
    assert figure.axes[0].get_ylabel() == "sum of weights per 2"
    again = data_like_figure(SCORE, BINS, nothing, nothing, figure=figure)
    assert again is figure
    assert len(figure.axes) == 2


def test_the_tail_names_its_bins_by_their_edges():
    parts = {"matched": np.arange(5, 0, -1.0), "unmatched": np.arange(5.0)}
    figure = tail_figure(SCORE, Binning.of([0, 1, 2, 4, 9, 99]), np.full(5, 5.0), parts)
    (axes,) = figure.axes
    assert [t.get_text() for t in axes.get_xticklabels()] == ["0", "1", "2", "4", "9"]
    assert labels_of(axes) == ["events fitted", "unmatched", "matched"]
    assert png(figure)
