"""Figures of fat jets, of the tag and of the branches."""

from __future__ import annotations

import dataclasses
import itertools
import re

import numpy as np
import pytest

from toprecon.boosted import TagRates, roc
from toprecon.figures import branch_figure, fat_jet_figure, png, tag_figure
from toprecon.statistics import Measured


@pytest.fixture
def masses(rng):
    """A narrow groomed peak, a wide plain one, W masses, some undefined."""
    plain = np.append(rng.normal(185, 25, 2000), np.nan)
    groomed = np.append(rng.normal(172, 8, 2000), np.nan)
    w = np.append(rng.normal(80, 7, 2000), np.nan)
    return {
        "boosted.mass": plain.astype(np.float32),
        "boosted.groomed_mass": groomed.astype(np.float32),
        "boosted.w_mass": w.astype(np.float32),
    }


def half_of(words):
    """Interval stated in the legend."""
    return [float(x) for x in re.search(r"in (\d+) to (\d+) GeV", words).groups()]


def legend_of(axes):
    return [text.get_text() for text in axes.get_legend().get_texts()]


def test_masses_are_drawn_with_median_and_half_of_them(masses):
    figure = fat_jet_figure(masses, caption="simulated")
    left, right = figure.axes
    before, groomed = legend_of(left)
    assert "median 185 GeV" in before
    assert "median 172 GeV" in groomed
    # the shortest half of a Gaussian is 2 x 0.6745 sigma wide: 10.8 and 34 GeV; it is
    # found to about a tenth of that
    low, high = half_of(groomed)
    assert high - low == pytest.approx(10.8, abs=2)
    low, high = half_of(before)
    assert high - low == pytest.approx(33.7, abs=4)
    heights = [patch.get_data().values for patch in left.patches]
    assert [h.sum() for h in heights] == pytest.approx([1, 1], abs=0.01)
    assert right.patches[0].get_data().values.sum() == pytest.approx(1)
    assert png(figure).startswith(b"\x89PNG")


def test_weight_zero_leaves_a_fat_jet_out(masses):
    weight = np.zeros(2001)
    weight[7] = 2.0
    figure = fat_jet_figure(masses, weight=weight)
    middle = masses["boosted.groomed_mass"][7]
    assert f"median {middle:.0f} GeV" in legend_of(figure.axes[0])[1]


def test_tables_without_fat_jets_give_an_empty_figure():
    nothing = np.full(3, np.nan)
    names = ("mass", "groomed_mass", "w_mass")
    figure = fat_jet_figure({f"boosted.{name}": nothing for name in names})
    assert png(figure)


def test_tag_shows_curve_and_cuts(rng):
    curve = roc(rng.normal(1, 1, 500), rng.normal(-1, 1, 500))
    figure = tag_figure(curve, TagRates(0.6, 0.02, 0.05, 0.01))
    (axes,) = figure.axes
    assert "60 % of tops" in legend_of(axes)[1]
    assert f"area {curve.area:.3f}" in legend_of(axes)[0]
    again = tag_figure(curve, figure=figure)
    assert again is figure
    assert len(legend_of(figure.axes[0])) == 1


@dataclasses.dataclass(frozen=True)
class Point:
    branch: str
    sqrt_s: float
    helicity: str
    efficiency: Measured
    generated_selected: Measured
    shift: Measured
    possible: Measured


def test_branches_are_drawn_against_energy():
    rows = [
        Point(
            b,
            e,
            h,
            efficiency=Measured(0.5, 0.01),
            generated_selected=Measured(0.4, 0.02),
            shift=Measured(s, 0.01),
            possible=Measured(0.9, 0.01),
        )
        for b, s in (("resolved", -0.1), ("boosted", 0.02), ("wide", 0.0))
        for e in (1000.0, 3000.0)
        for h in ("LR", "RL")
    ]
    figure = branch_figure(rows)
    names = [text.get_text() for text in figure.legends[0].get_texts()]
    assert len(names) == 6
    assert "resolved, e-L e+R" in names
    drawn = [list(a.containers[0].lines[0].get_ydata()) for a in figure.axes]
    assert drawn[:2] == [[0.9, 0.9], [0.5, 0.5]]
    assert drawn[2] == pytest.approx([-0.25, -0.25])
    assert list(figure.axes[2].get_xticks()) == [1000, 3000]
    one = branch_figure(rows[:1], figure=figure)
    assert len(one.legends) == 1
    assert len(one.legends[0].get_texts()) == 1


def test_labels_of_many_energies_do_not_overlap():
    value = Measured(0.5, 0.01)
    energies = (380.0, 500.0, 700.0, 1000.0, 1400.0, 3000.0)
    rows = [Point("boosted", e, "LR", value, value, value, value) for e in energies]
    figure = branch_figure(rows)
    png(figure)
    for axes in figure.axes:
        low, high = axes.get_xlim()
        boxes = [
            label.get_window_extent()
            for label, place in zip(
                axes.get_xticklabels(), axes.get_xticks(), strict=True
            )
            if low <= place <= high
        ]
        assert len(boxes) >= 2
        assert all(a.x1 < b.x0 for a, b in itertools.pairwise(boxes))


def test_half_of_the_masses_follows_the_weights():
    values = np.array([100.0, 101.0, 102.0, 170.0, 171.0, 300.0, np.nan])
    table = {f"boosted.{n}": values for n in ("mass", "groomed_mass", "w_mass")}
    plain = legend_of(fat_jet_figure(table).axes[0])[0]
    assert half_of(plain) == [100, 102]
    weight = np.array([1, 1, 1, 4, 4, 1, 9.0])
    weighted = legend_of(fat_jet_figure(table, weight=weight).axes[0])[0]
    assert half_of(weighted) == [170, 171]
    assert "median 170 GeV" in weighted


def test_figures_show_themselves_in_a_notebook(masses):
    formatter = pytest.importorskip("IPython.core.formatters").PNGFormatter()
    assert formatter(fat_jet_figure(masses)).startswith(b"\x89PNG")
