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
    assert labels.count("cut, not applied here") == 1
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


def test_a_process_keeps_its_colour_whatever_its_size():
    colours = []
    for size in (10.0, 1000.0):
        stack = {"pairs": np.full(5, 100.0), "ww": np.full(5, size)}
        axes = data_like_figure(SCORE, BINS, stack, stack).axes[0]
        colours.append({p.get_label(): p.get_facecolor() for p in axes.patches[:2]})
    assert colours[0] == colours[1]
    assert colours[0]["pairs"] != colours[0]["ww"]


def test_the_tail_names_its_bins_by_their_edges():
    parts = {"matched": np.arange(5, 0, -1.0), "unmatched": np.arange(5.0)}
    data = np.array([5.0, 5, 5, 5, 7])
    figure = tail_figure(
        SCORE, Binning.of([0, 1, 2, 4.5, 9, 99]), data, parts,
        errors=np.full(5, 2.0), place=9.0, is_expected=True,
    )  # fmt: skip
    axes, below = figure.axes
    ticks = [t.get_text() for t in below.get_xticklabels()]
    assert ticks == ["0.0", "1.0", "2.0", "4.5", "9.0"]
    assert set(labels_of(axes)) == {
        "events fitted",
        "unmatched",
        "matched",
        "tail from 9",
    }
    assert axes.get_ylabel() == "expected events per bin"
    points = below.lines[-2].get_ydata()
    assert list(points) == [0, 0, 0, 0, 1]
    assert list(below.lines[-1].get_xdata()) == [4, 4]
    assert png(figure)


def test_the_tail_is_drawn_without_errors_as_well():
    parts = {"matched": np.arange(5, 0, -1.0)}
    figure = tail_figure(SCORE, BINS, np.zeros(5), parts)
    assert labels_of(figure.axes[0]) == ["events fitted", "matched"]
    assert figure.axes[0].get_ylabel() == "sum of weights per bin"
    assert png(figure)
