from __future__ import annotations

import numpy as np
import pytest

from tests.toys import selected, toy_table
from toprecon.errors import OptionError, StudyError
from toprecon.migration import MigrationOptions, accumulate
from toprecon.migration.unfolding import (
    Method,
    UnfoldingOptions,
    best_strength,
    signal_share,
    unfold,
)

CAUSES = {
    "loss": 0.2,
    "resolution": 0.1,
    "wrong_b": 0.2,
    "unmatched": 0.2,
    "outside": 0.05,
    "background": 0.1,
}
FOUR = MigrationOptions(edges=(-1, -0.5, 0, 0.5, 1))
FINER = MigrationOptions(
    edges=(-1, -0.5, 0, 0.5, 1), reco_edges=tuple(np.linspace(-1, 1, 9))
)
METHODS = [
    UnfoldingOptions(),
    UnfoldingOptions(method="tikhonov", strength=50.0),
    UnfoldingOptions(method="bayes", iterations=3),
]


def matrix(options=FOUR, n=20_000, seed=3, **changes):
    table = toy_table(n, seed=seed, **{**CAUSES, **changes})
    return accumulate(table, selected(table), table["weight"], options)


@pytest.mark.parametrize("options", [FOUR, FINER, MigrationOptions()])
@pytest.mark.parametrize("method", METHODS, ids=lambda m: m.method)
def test_the_simulated_spectrum_itself_gives_back_its_truth(options, method):
    m = matrix(options)
    found = unfold(m, m.reconstructed, method)
    # every method leaves the simulation where it is; pure linear algebra
    assert found.values == pytest.approx(m.generated, rel=1e-9)
    assert found.method is method.method
    assert found.asymmetry.value == pytest.approx(
        np.dot(np.sign(m.true_binning.centres), m.generated) / m.generated.sum()
    )


def test_the_inversion_is_unbiased_and_its_covariance_is_the_spread(rng):
    m = matrix()
    truth = m.generated * np.array([1.5, 0.8, 1.0, 1.2])
    share = signal_share(m)
    mean = m.response.T @ truth / share + m.background
    toys = np.array([unfold(m, rng.poisson(mean)).values for _ in range(3000)])
    error = toys.std(axis=0) / np.sqrt(3000)
    assert np.all(abs(toys.mean(axis=0) - truth) < 4.5 * error)
    found = unfold(m, mean)
    errors = np.sqrt(np.diagonal(found.covariance))
    # a spread of 3000 is known to 1.3 %; 4.5 sigma
    assert toys.std(axis=0) == pytest.approx(errors, rel=0.06)
    correlation = found.covariance / np.outer(errors, errors)
    assert np.corrcoef(toys.T) == pytest.approx(correlation, abs=0.08)


@pytest.mark.parametrize("method", METHODS, ids=lambda m: m.method)
@pytest.mark.parametrize("options", [FOUR, FINER])
def test_derivatives_are_those_of_a_repeated_unfolding(method, options, rng):
    m = matrix(options)
    data = rng.poisson(m.reconstructed).astype(float)
    errors = data.copy()
    found = unfold(m, data, method, covariance=errors)
    for index in range(len(data)):
        step = np.zeros(len(data))
        step[index] = 1e-2
        up, down = (
            unfold(m, data + s * step, method, covariance=errors).values
            for s in (1, -1)
        )
        numeric = (up - down) / 2e-2
        # Tikhonov: the scale of the curvature follows the size of the data a little
        tolerance = 1e-2 if method.method is Method.TIKHONOV else 1e-6
        assert found.gradient[:, index] == pytest.approx(numeric, abs=tolerance)


def test_bayes_agrees_with_its_formula_written_as_loops(rng):
    m = matrix(outside=0.0, background=0.0)
    data = rng.poisson(m.reconstructed * np.array([1.3, 1, 0.8, 1])).astype(float)
    r = m.response.T
    prior = m.generated / m.generated.sum()
    # G. D'Agostini, Nucl. Instrum. Meth. A362 (1995) 487, equations (3) to (5)
    for _ in range(3):
        estimate = np.zeros(4)
        for j in range(4):
            for i in range(4):
                p = r[i, j] * prior[j] / sum(r[i, k] * prior[k] for k in range(4))
                estimate[j] += data[i] * p
            estimate[j] /= r[:, j].sum()
        prior = estimate / estimate.sum()
    found = unfold(m, data, UnfoldingOptions(method="bayes", iterations=3))
    assert found.values == pytest.approx(estimate, rel=1e-12)


def test_many_bayes_iterations_become_the_inversion(rng):
    m = matrix(outside=0.0, background=0.0)
    data = m.reconstructed * np.array([1.1, 0.95, 1.0, 1.02])
    inverted = unfold(m, data).values
    few, many = (
        unfold(m, data, UnfoldingOptions(method="bayes", iterations=n)).values
        for n in (2, 3000)
    )
    assert many == pytest.approx(inverted, rel=1e-4)
    assert np.abs(few - inverted).max() > 1e-3 * inverted.max()


def test_strong_regularisation_keeps_the_simulated_shape_and_none_inverts(rng):
    m = matrix(MigrationOptions())
    data = rng.poisson(m.reconstructed).astype(float)
    strong = unfold(m, data, UnfoldingOptions(method="tikhonov", strength=1e12))
    ratio = strong.values / m.generated
    # only a straight line of the ratio has no curvature
    assert np.diff(ratio, n=2) == pytest.approx(np.zeros(8), abs=1e-4)
    none = unfold(m, data, UnfoldingOptions(method="tikhonov", strength=0.0))
    assert none.values == pytest.approx(unfold(m, data).values, rel=1e-9)


def test_regularisation_trades_variance_for_bias(rng):
    m = matrix(MigrationOptions())
    data = rng.poisson(m.reconstructed).astype(float)
    errors = [
        np.sqrt(
            np.diagonal(
                unfold(
                    m, data, UnfoldingOptions(method="tikhonov", strength=s)
                ).covariance
            )
        ).mean()
        for s in (0.0, 10.0, 1e3, 1e5)
    ]
    assert errors == sorted(errors, reverse=True)


def test_the_automatic_strength_has_the_least_mean_global_correlation(rng):
    m = matrix(MigrationOptions())
    data = rng.poisson(m.reconstructed).astype(float)
    found = unfold(m, data, UnfoldingOptions(method="tikhonov"))
    best = np.mean(found.global_correlations)
    for factor in (0.1, 10.0):
        other = unfold(
            m,
            data,
            UnfoldingOptions(method="tikhonov", strength=found.strength * factor),
        )
        assert np.mean(other.global_correlations) >= best
    share = signal_share(m)
    signal = (data - m.background) * share
    assert found.strength == best_strength(m, signal, np.diag(data * share**2))


def test_global_correlations_are_multiple_correlations(rng):
    m = matrix()
    found = unfold(m, m.reconstructed)
    toys = rng.multivariate_normal(np.zeros(4), found.covariance, 40_000)
    for j in range(4):
        others = np.delete(toys, j, axis=1)
        fit, *_ = np.linalg.lstsq(others, toys[:, j], rcond=None)
        multiple = np.corrcoef(others @ fit, toys[:, j])[0, 1]
        # known to (1 - r^2)/sqrt(N) < 0.005
        assert found.global_correlations[j] == pytest.approx(multiple, abs=0.03)


def test_more_reconstructed_bins_than_generated_ones_do_not_hurt(rng):
    coarse, fine = matrix(FOUR), matrix(FINER)
    a = unfold(coarse, coarse.reconstructed).asymmetry.error
    b = unfold(fine, fine.reconstructed).asymmetry.error
    assert b < 1.02 * a


def test_fakes_are_removed_as_a_share_and_background_as_events():
    m = matrix(outside=0.2, background=0.2)
    share = signal_share(m)
    inside = m.counts.sum(axis=0)
    assert share == pytest.approx(inside / (inside + m.from_outside))
    twice = 2 * (m.reconstructed - m.background) + m.background
    assert unfold(m, twice).values == pytest.approx(2 * m.generated, rel=1e-9)


def test_a_covariance_of_the_data_is_used():
    m = matrix()
    plain = unfold(m, m.reconstructed)
    scaled = unfold(m, m.reconstructed, covariance=4 * m.reconstructed)
    full = unfold(m, m.reconstructed, covariance=np.diag(4 * m.reconstructed))
    assert scaled.covariance == pytest.approx(4 * plain.covariance)
    assert full.covariance == pytest.approx(scaled.covariance)


@pytest.mark.parametrize("method", METHODS, ids=lambda m: m.method)
def test_empty_bins_of_the_data_are_no_problem(method):
    m = matrix(FINER)
    data = m.reconstructed.copy()
    data[2] = 0
    found = unfold(m, data, method)
    assert np.isfinite(found.values).all()
    assert np.isfinite(found.covariance).all()


def test_impossible_requests_are_explained():
    m = matrix()
    with pytest.raises(StudyError, match=r"data of shape \(4,\) are required; got"):
        unfold(m, np.zeros(5))
    wide = MigrationOptions(edges=(-1, 0, 0.5, 1), reco_edges=(-1, 0, 1))
    with pytest.raises(StudyError, match="at least as many reconstructed bins as ge"):
        unfold(matrix(wide), np.zeros(2))
    tiny = MigrationOptions(edges=(-1, -0.9999999, 0, 1))
    with pytest.raises(StudyError, match=r"selected events in every generated bin ar"):
        unfold(matrix(tiny, n=100), np.zeros(3))
    same = MigrationOptions(edges=(-1, 0, 1), reco_edges=(-1, 0.9999999, 1))
    with pytest.raises(StudyError, match="a response that can be inverted is required"):
        unfold(matrix(same, n=100, resolution=0.0), np.zeros(2))
    with pytest.raises(OptionError, match="iterations: must be >= 1; got 0"):
        UnfoldingOptions(iterations=0)
    with pytest.raises(OptionError, match="method: must be one of"):
        UnfoldingOptions(method="magic")
