"""What figures say and show agrees with the numbers they were given."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from toprecon import figures
from toprecon.events import CutFlow
from toprecon.figures import style
from toprecon.figures.angle import CENTRES
from toprecon.migration import MigrationOptions
from toprecon.statistics import Measured
from toprecon.study import (
    OBSERVABLES,
    Binning,
    ScanAxis,
    closure_of,
    compare_plans,
    scan_cuts,
)

CAPTION = "simulated events; statistical errors only"
CHI2 = next(item for item in OBSERVABLES if item.name == "pairing.chi2")


def texts(figure):
    """Everything written in a figure."""
    found = [item.get_text() for item in figure.texts]
    for axes in figure.axes:
        found += [item.get_text() for item in axes.texts]
        found += [axes.get_title(loc="left"), axes.get_xlabel(), axes.get_ylabel()]
        found += [item.get_text() for item in axes.get_yticklabels()]
        if axes.get_legend():
            found += [item.get_text() for item in axes.get_legend().get_texts()]
    for legend in figure.legends:
        found += [item.get_text() for item in legend.get_texts()]
    return found


def all_figures(beams, live):
    bins = Binning.regular(40, 0, 50)
    classes = live.distribution("pairing.chi2", bins)
    a = beams.asymmetry
    axes = [
        ScanAxis.spread(name, live.table[name], n=20, keep=keep)
        for name, keep in (("pairing.chi2", "below"), ("pairing.share", "above"))
    ]
    scans = [scan_cuts(live.table, live.plan, *axes[:n]) for n in (1, 2)]
    other = live.plan.with_cut("pairing.chi2", high=6)
    comparison = compare_plans(live.table, live.plan, other)
    selected = np.flatnonzero(live.selected())
    return {
        "angle": figures.angle_figure(a, caption=CAPTION),
        "budget": figures.budget_figure(a.budget, caption=CAPTION),
        "classes": figures.class_figure(a, caption=CAPTION),
        "flips": figures.flip_figure(a, caption=CAPTION),
        "flow": figures.cut_flow_figure(beams.cut_flow, caption=CAPTION),
        "matrix": figures.matrix_figure(beams.migration, caption=CAPTION),
        "distribution": figures.distribution_figure(CHI2, bins, classes, caption=CAPTION),
        "scan": figures.scan_figure(scans[0], best=scans[0].best, caption=CAPTION),
        "scan of two": figures.scan_figure(scans[1], best=scans[1].best, caption=CAPTION),
        "comparison": figures.comparison_figure(comparison, caption=CAPTION),
        "closure": figures.closure_figure(closure_of(live.table, live.plan), caption=CAPTION),
        "event": figures.event_figure(live.view_event(selected[0]), caption=CAPTION),
        "purity": figures.purity_figure(CHI2, bins, classes, caption=CAPTION),
    }  # fmt: skip


def test_every_figure_says_what_it_rests_on(beams, live):
    for name, figure in all_figures(beams, live).items():
        assert CAPTION in texts(figure), name


def written_boxes(figure):
    """Every text with the box it covers [px]."""
    figure.canvas.draw()
    renderer = figure.canvas.get_renderer()
    items = [item for legend in figure.legends for item in legend.get_texts()]
    items += figure.texts
    for axes in figure.axes:
        items += [*axes.texts, axes._left_title, axes.xaxis.label, axes.yaxis.label]
        if axes.axison:
            for axis in (axes.xaxis, axes.yaxis):
                items += [tick.label1 for tick in axis._update_ticks()]
        if axes.get_legend():
            items += axes.get_legend().get_texts()
    return [
        (item.get_text(), item.get_window_extent(renderer))
        for item in items
        if item.get_text().strip() and item.get_visible()
    ]


def test_no_text_leaves_the_figure(beams, live):
    for name, figure in all_figures(beams, live).items():
        for text, box in written_boxes(figure):
            assert box.x0 >= 0, (name, text)
            assert box.y0 >= 0, (name, text)
            assert box.x1 <= figure.bbox.width, (name, text)
            assert box.y1 <= figure.bbox.height, (name, text)


def test_no_text_covers_another(beams, live):
    for name, figure in all_figures(beams, live).items():
        boxes = written_boxes(figure)
        for index, (text, box) in enumerate(boxes):
            for other, place in boxes[index + 1 :]:
                across = min(box.x1, place.x1) - max(box.x0, place.x0)
                along = min(box.y1, place.y1) - max(box.y0, place.y0)
                assert min(across, along) < 2, (name, text, other)


def test_angle_header_gives_the_numbers_rounded_to_their_errors(beams):
    a = beams.asymmetry
    words = texts(figures.angle_figure(a))
    assert style.pm(a.generated) in words
    assert style.pm(a.reconstructed) in words
    assert f"{style.pm(a.acceptance_shift, sign=True)} by selection" in words
    assert f"{style.pm(a.shift, sign=True)} by reconstruction" in words


def test_curves_are_the_spectra(beams):
    figure = figures.angle_figure(beams.asymmetry)
    upper = figure.axes[1]
    drawn = [patch.get_data().values for patch in upper.patches]
    selected, _ = beams.asymmetry.spectra.rebinned("generated_selected", 2)
    reconstructed, _ = beams.asymmetry.spectra.rebinned("reconstructed", 2)
    everything, _ = beams.asymmetry.spectra.rebinned("generated", 2)
    scaled = everything * selected.sum() / everything.sum()
    for expected in (selected, reconstructed, scaled):
        assert any(np.allclose(values, expected) for values in drawn)
    assert len(selected) == len(CENTRES)


def test_signal_alone_is_a_row_of_its_own_when_there_is_background(beams):
    assert "reconstructed_signal" not in figures.usual_variants(beams.asymmetry)
    spectra = beams.asymmetry.spectra

    class WithBackground:
        selected_sum = beams.asymmetry.selected_sum + 100
        signal_sum = beams.asymmetry.signal_sum

    assert "reconstructed_signal" in figures.usual_variants(WithBackground())
    assert spectra is beams.asymmetry.spectra


def test_budget_shows_every_step_that_does_something(beams):
    budget = beams.asymmetry.budget
    words = texts(figures.budget_figure(budget))
    for step in budget.steps:
        if step.shift.value:
            assert style.signed(step.shift) in words
    assert any(style.pm(budget.total, sign=True) in text for text in words)


@pytest.mark.parametrize("share", [0.1, 0.3, 0.419, 0.421, 0.6, 0.95])
def test_numbers_in_the_cells_can_be_read(beams, share):
    # contrast as defined by WCAG 2.1, 1.4.3: at least 4.5 to 1 for text
    from matplotlib.colors import to_rgb

    from toprecon.figures.matrix import SHADES

    counts = np.full((2, 2), 1 - share)
    np.fill_diagonal(counts, share)
    edges = MigrationOptions(edges=(-1.0, 0.0, 1.0)).true_binning
    one, none = np.ones(2), np.zeros(2)
    sizes = dict.fromkeys(("missed", "from_outside", "background"), none) | {
        "counts": counts,
        "generated": one,
    }
    sizes |= {f"{name}_variances": values for name, values in sizes.items()}
    small = dataclasses.replace(
        beams.migration, true_binning=edges, reco_binning=edges,
        replicas=np.zeros((0, 4, 3)), **sizes,
    )  # fmt: skip
    cells = figures.matrix_figure(small).axes[0].texts
    number = f"{100 * share:.0f}"
    cell = next(item for item in cells if item.get_text() == number)
    inks = [_luminance(to_rgb(cell.get_color())), _luminance(SHADES(share)[:3])]
    assert (max(inks) + 0.05) / (min(inks) + 0.05) >= 4.5


def _luminance(rgb):
    """Relative luminance, WCAG 2.1."""
    r, g, b = (c / 12.92 if c <= 0.03928 else ((c + 0.055) / 1.055) ** 2.4 for c in rgb)
    return 0.2126 * r + 0.7152 * g + 0.0722 * b


def test_matrix_with_different_bins_shows_no_purity(beams, live):
    from toprecon.study import run_study

    plan = live.plan.with_settings({"migration.reco_edges": [-1.0, -0.3, 0.5, 1.0]})
    words = texts(figures.matrix_figure(run_study(live.table, plan).migration))
    assert "purity" not in words
    assert "selected" in words


def test_cut_flow_names_every_step_and_its_share(beams):
    flow = beams.cut_flow
    words = texts(figures.cut_flow_figure(flow))
    assert set(flow.steps) <= set(words)
    assert f"{100 * flow.efficiency[-1]:.1f} %" in words


def test_empty_cut_flow_is_drawn_without_a_word_of_nan():
    flow = CutFlow(("all events", "1 lepton"), np.zeros(2, int), *np.zeros((2, 2)))
    assert not any("nan" in text for text in texts(figures.cut_flow_figure(flow)))


def test_purity_is_the_share_of_right_pairings_kept(beams):
    bins = Binning.regular(4, 0, 4)
    classes = {
        "correct": np.array([8.0, 4, 2, 0]),
        "b_swapped": np.array([0.0, 1, 1, 1]),
        "unmatched": np.array([2.0, 0, 0, 1]),
        "background": np.array([50.0, 0, 0, 0]),
    }
    axes = figures.purity_figure(CHI2, bins, classes).axes[0]
    matched, everything, kept = (line.get_ydata() for line in axes.lines[:3])
    assert np.allclose(matched, [1, 12 / 13, 14 / 16, 14 / 17])
    assert np.allclose(everything, [0.8, 12 / 15, 14 / 18, 14 / 20])
    assert np.allclose(kept, [0.5, 0.75, 0.9, 1])
    axes = figures.purity_figure(CHI2, bins, classes, is_upper=False).axes[0]
    assert np.allclose(axes.lines[2].get_ydata(), [1, 0.5, 0.25, 0.1])


def test_comparison_shows_both_values_and_the_paired_difference(live):
    other = live.plan.with_cut("pairing.chi2", high=6)
    comparison = compare_plans(live.table, live.plan, other)
    words = texts(figures.comparison_figure(comparison, names=("wide", "tight")))
    item = comparison["reconstructed"]
    assert {"wide", "tight"} <= set(words)
    assert style.pm(item.first) in words
    assert style.pm(item.second) in words
    assert style.pm(item.difference, sign=True) in words


def test_scan_marks_the_point_chosen(live):
    axis = ScanAxis.spread("pairing.chi2", live.table["pairing.chi2"], n=30)
    scan = scan_cuts(live.table, live.plan, axis)
    left, right = figures.scan_figure(scan, best=scan.best).axes
    marked = scan.best.index[0]
    assert any(np.allclose(line.get_xdata(), marked) for line in right.lines)
    total = right.lines[0].get_ydata()
    assert np.allclose(total, scan.everything.total_error[:, 0], equal_nan=True)
    assert left.get_xlabel() == "efficiency"


def test_closure_shows_the_residuals_over_their_errors(live):
    closure = closure_of(live.table, live.plan)
    upper, lower = figures.closure_figure(closure).axes
    (pulls,) = [line for line in lower.lines if len(line.get_ydata()) > 2]
    assert np.allclose(pulls.get_ydata(), closure.pulls)
    generated = upper.patches[0].get_data().values
    assert np.allclose(generated, closure.generated)
    assert f"χ² {closure.chi2:.1f}" in upper.get_title(loc="left")


def test_event_lists_every_object_with_both_assignments(live):
    row = int(np.flatnonzero(live.selected() & (live.table["pairing_class"] == 4))[0])
    view = live.view_event(row)
    words = texts(figures.event_figure(view))
    for item in view.objects:
        assert item.name in words
    assigned = [item.side for item in view.objects if item.role == "b"]
    generated = [item.true_side for item in view.objects if item.true_role == "b"]
    assert sorted(assigned) == sorted(generated) == ["antitop", "top"]
    for item in view.objects:  # b jets swapped, nothing else
        if item.role == "b" and item.true_role == "b":
            assert item.side != item.true_side
    assert "pairing: b swapped" in words
    assert len(view.generated) == 6


def test_numbers_are_written_with_their_error():
    assert style.pm(Measured(-0.0327, 0.00502)) == "−0.0327 ± 0.0050"
    assert style.pm(Measured(0.0166, 0.0065), sign=True) == "+0.0166 ± 0.0065"
    assert style.pm(Measured(float("nan"), 0.1)) == "missing"
    assert style.signed(Measured(-0.0327, 0.00502)) == "−0.0327"
    assert style.signed(Measured(float("nan"), 0.1)) == "missing"


def test_classes_can_be_told_apart_without_colour():
    looks = [hatch for _, _, hatch in style.CLASSES.values()]
    assert len([look for look in looks if look == ""]) <= 2
    assert len(set(looks)) == len(looks) - 1


def test_legend_names_the_classes_asked_for():
    words = texts(figures.class_legend(["unmatched", "correct"]))
    assert words == ["correct", "unmatched"]
