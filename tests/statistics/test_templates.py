"""Yields of templates: recovered, with honest errors."""

from __future__ import annotations

import numpy as np
import pytest

from toprecon.errors import StudyError
from toprecon.statistics import fit_templates

SHAPES = np.array([[40, 30, 20, 8, 2], [5, 10, 20, 30, 35]]) / 100


def test_exact_sums_give_exact_yields():
    data = 700 * SHAPES[0] + 300 * SHAPES[1]
    found = fit_templates(data, 1e6 * SHAPES, 1e6 * SHAPES)
    assert found.yields == pytest.approx([700, 300], rel=1e-9)
    assert found.chi2 == pytest.approx(0, abs=1e-12)
    assert found.degrees == 3
    assert found.expected == pytest.approx(data)


def test_templates_without_errors_give_the_least_squares_of_scipy():
    optimize = pytest.importorskip("scipy.optimize")
    data = np.array([310.0, 260, 190, 150, 105])
    found = fit_templates(data, 1e12 * SHAPES, 1e12 * SHAPES)
    sigma = np.sqrt(found.expected)
    best = optimize.least_squares(lambda n: (data - n @ SHAPES) / sigma, [500.0, 500.0])
    assert found.yields == pytest.approx(best.x, rel=1e-6)
    inverse = np.linalg.inv(best.jac.T @ best.jac)
    assert found.covariance == pytest.approx(inverse, rel=1e-5)


def test_what_is_held_fixed_is_taken_off():
    rest = np.array([50.0, 40, 30, 20, 10])
    data = 700 * SHAPES[0] + 300 * SHAPES[1] + rest
    found = fit_templates(data, 1e6 * SHAPES, 1e6 * SHAPES, fixed=rest)
    assert found.yields == pytest.approx([700, 300], rel=1e-6)
    unsure = fit_templates(
        data, 1e6 * SHAPES, 1e6 * SHAPES, fixed=rest, fixed_error=0.5
    )
    assert unsure.yields == pytest.approx([700, 300], rel=1e-6)
    assert (np.diag(unsure.covariance) > np.diag(found.covariance)).all()


def test_counts_are_fitted_with_templates_of_any_weight():
    data = np.array([310.0, 260, 190, 150, 105])
    plain = fit_templates(data, 1e6 * SHAPES, 1e6 * SHAPES)
    heavy = fit_templates(data, 1e6 * SHAPES, 2e6 * SHAPES, data_weight=1.0)
    assert heavy.yields == pytest.approx(plain.yields, rel=1e-3)
    assert heavy.covariance == pytest.approx(plain.covariance, rel=1e-2)
    same = fit_templates(data, 1e6 * SHAPES, 2e6 * SHAPES)
    assert same.covariance == pytest.approx(2 * plain.covariance, rel=1e-2)


def test_the_size_of_a_template_has_no_error():
    """One template takes all: the error is that of a Poisson count."""
    shape = np.array([[4.0, 3, 2, 1]])
    found = fit_templates(100 * shape[0], shape, shape, data_weight=1.0)
    assert found.yields[0] == pytest.approx(1000)
    assert found.covariance[0, 0] == pytest.approx(1000)


@pytest.mark.parametrize("weighted", [False, True])
def test_errors_cover_the_truth_with_small_templates(rng, weighted):
    """400 toys: 68.3 % within 4 binomial standard deviations (fails 1 in 16 000)."""
    inside, chi2 = 0, []
    for _ in range(400):
        kinds = []
        for n, shape in ((900, 0), (500, 1), (700, 0), (300, 1)):
            bins = rng.choice(5, rng.poisson(n), p=SHAPES[shape])
            w = rng.choice([0.5, 2.0], len(bins)) if weighted else np.ones(len(bins))
            kinds.append(
                [np.bincount(bins, w**k, minlength=5).astype(float) for k in (1, 2)]
            )
        (m, mv), (u, uv), (dm, _), (du, _) = kinds
        found = fit_templates(dm + du, [m, u], [mv, uv])
        truth = 300 * (1.25 if weighted else 1.0)
        error = np.sqrt(found.covariance[1, 1])
        inside += abs(found.yields[1] - truth) < error
        chi2.append(found.chi2)
    assert abs(inside / 400 - 0.683) < 4 * np.sqrt(0.683 * 0.317 / 400)
    # the mean of a chi-square is its degrees of freedom; a tenth for small counts
    assert np.mean(chi2) == pytest.approx(3, abs=0.3 + 4 * np.sqrt(6 / 400))


@pytest.mark.parametrize(
    ("templates", "words"),
    [(np.zeros((2, 5)), "positive sum"), (np.ones((6, 5)), "5 bins")],
)
def test_impossible_fits_are_refused(templates, words):
    with pytest.raises(StudyError, match=words):
        fit_templates(np.ones(5), templates, templates)
