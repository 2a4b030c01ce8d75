from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.require import require
from tests.toys import draw_cosines, selected, toy_table
from toprecon.asymmetry import EstimatorOptions, accumulate, estimate, fit_terms
from toprecon.asymmetry.spectra import BINS
from toprecon.errors import OptionError
from toprecon.resampling import replica_counts
from toprecon.treelevel import angular_terms

EVERYWHERE = np.ones(len(BINS), bool)
E = BINS.array
INTEGRALS = np.diff(np.stack([E + E**3 / 3, E - E**3 / 3, E**2 / 2], axis=1), axis=0)


def spectra_of(table):
    return accumulate(table, selected(table), table["weight"]).spectra


@given(
    st.floats(1, 1e4),
    st.floats(0, 1e4),
    st.floats(-0.99, 0.99),
    st.sampled_from([1.0, 0.95, 0.6]),
)
def test_an_exact_spectrum_gives_back_its_terms(a, b, k, largest):
    # a distribution is positive if |k| is below twice the coefficient of 1 + cos^2
    wanted = np.array([a, b, 2 * a * k])
    contents = INTEGRALS @ wanted
    fit = fit_terms(contents, contents, abs(BINS.centres) < largest)
    assert fit.coefficients == pytest.approx(wanted, abs=1e-7 * (a + b))
    assert fit.chi2 == pytest.approx(0, abs=1e-6)
    expected = wanted[2] / (8 / 3 * a + 4 / 3 * b)
    assert fit.asymmetry.value == pytest.approx(expected, abs=1e-7)
    at = np.array([-0.5, 0.0, 0.3])
    curve = wanted @ np.array([1 + at**2, 1 - at**2, at])
    assert fit.curve(at) == pytest.approx(curve, abs=1e-6 * (a + b))


@pytest.mark.parametrize("helicity", [-1, 1])
def test_the_tree_level_has_the_asymmetry_of_its_terms(helicity):
    terms = angular_terms(500.0, helicity)
    wanted = np.array(
        [float(terms.transverse), float(terms.longitudinal), float(terms.linear)]
    )
    contents = 100 * INTEGRALS @ wanted
    fit = fit_terms(contents, contents, abs(BINS.centres) < 0.9)
    # A_FB at 500 GeV, e-L e+R and e-R e+L (own calculation, see the tree-level tests)
    expected = {-1: 0.38235, 1: 0.47066}[helicity]
    assert fit.asymmetry.value == pytest.approx(expected, abs=1e-4)


def test_the_fit_is_the_maximum_of_the_poisson_likelihood(rng):
    optimize = require("scipy.optimize")
    contents = rng.poisson(INTEGRALS @ np.array([30.0, 20.0, 40.0])).astype(float)

    def minus_log_likelihood(c):
        mean = INTEGRALS @ c
        return (mean - contents * np.log(mean)).sum() if mean.min() > 0 else np.inf

    best = optimize.minimize(
        minus_log_likelihood,
        [30.0, 20.0, 40.0],
        method="Nelder-Mead",
        options={"xatol": 1e-9, "fatol": 1e-13, "maxiter": 20_000, "maxfev": 20_000},
    ).x
    fit = fit_terms(contents, contents, EVERYWHERE)
    # the simplex finds the flat minimum to about 1e-6
    assert fit.coefficients == pytest.approx(best, rel=2e-5)
    assert 0 < fit.probability <= 1


def test_the_fit_of_few_events_stays_finite(rng):
    for n in (3, 5, 10):
        contents = np.bincount(BINS.digitise(draw_cosines(n, 0.4, rng)), minlength=40)
        fit = fit_terms(contents, contents, EVERYWHERE)
        assert np.isfinite(fit.coefficients).all()
        assert np.isfinite(fit.covariance).all()


def toys(rng, n_toys, mean, weights):
    """Pulls of counting and fit, and both values, for repeated experiments."""
    truth = 0.4
    values, errors, correlations = [], [], []
    for _ in range(n_toys):
        n = rng.poisson(mean)
        index = BINS.digitise(draw_cosines(n, truth, rng))
        w = weights(rng, n)
        sums = np.bincount(index, w, minlength=40)
        variances = np.bincount(index, w**2, minlength=40)
        used = abs(BINS.centres) < 0.9
        fit = fit_terms(sums, variances, used)
        signs = np.where(BINS.centres > 0, 1.0, -1.0)
        counted = (signs * used) @ sums / sums[used].sum()
        gradient = (signs - counted) * used / sums[used].sum()
        covariance = np.diag(variances)
        pair = (counted, fit.asymmetry.value)
        error = (
            math.sqrt(gradient @ covariance @ gradient),
            fit.asymmetry.measured(covariance).error,
        )
        both = gradient @ covariance @ fit.asymmetry.gradient
        values.append(pair)
        errors.append(error)
        correlations.append(both / (error[0] * error[1]))
    return np.array(values), np.array(errors), np.array(correlations)


# counting in |c| < 0.9: the density 3/8 (1 + c^2) + A c integrated over the range
IN_RANGE = 0.4 * 0.9**2 / (0.75 * (0.9 + 0.9**3 / 3))


def check_coverage(rng, n_toys, weights):
    values, errors, correlations = toys(rng, n_toys, 2000, weights)
    for column, truth in ((0, IN_RANGE), (1, 0.4)):
        inside = np.mean(abs(values[:, column] - truth) < errors[:, column])
        error = math.sqrt(0.683 * 0.317 / n_toys)
        # 3.5 sigma, four numbers in all: fails with a probability of 0.2 %
        assert abs(inside - 0.683) < 3.5 * error, inside
        spread = values[:, column].std()
        assert spread == pytest.approx(
            errors[:, column].mean(), rel=3.5 / (2 * n_toys) ** 0.5
        )
    observed = np.corrcoef(values.T)[0, 1]
    expected = correlations.mean()
    # error of a correlation: (1 - r^2)/sqrt(N)
    assert abs(observed - expected) < 4 * (1 - expected**2) / math.sqrt(n_toys)
    # the fit uses the shape: it cannot be worse, and here it is better
    assert errors[:, 1].mean() < errors[:, 0].mean() * 0.4 / IN_RANGE


def unit(rng, n):
    return np.ones(n)


def mixed(rng, n):
    """Two samples of very different weights, as in a mix of beams."""
    return np.where(rng.uniform(size=n) < 0.7, 0.4, 2.5)


@pytest.mark.slow
@pytest.mark.parametrize("weights", [unit, mixed])
def test_errors_of_counting_and_fit_cover_in_toys(rng, weights):
    check_coverage(rng, 100, weights)


@pytest.mark.soak
@pytest.mark.parametrize("weights", [unit, mixed])
def test_errors_of_counting_and_fit_cover_in_many_toys(rng, weights):
    check_coverage(rng, 500, weights)


def test_derivatives_of_the_fit_are_those_of_a_repeated_fit():
    contents = INTEGRALS @ np.array([3000.0, 2000.0, 4000.0])
    rng = np.random.default_rng(3)
    contents = rng.poisson(contents).astype(float)
    fit = fit_terms(contents, contents, EVERYWHERE)
    for index in (0, 7, 20, 39):
        up, down = contents.copy(), contents.copy()
        up[index] += 1
        down[index] -= 1
        numeric = (
            fit_terms(up, up, EVERYWHERE).asymmetry.value
            - fit_terms(down, down, EVERYWHERE).asymmetry.value
        ) / 2
        # left out: the change of the variances with the fit, of the order of the
        # relative deviations (1/sqrt(100))
        assert fit.asymmetry.gradient[index] == pytest.approx(
            numeric, rel=0.25, abs=1e-7
        )


def test_both_estimators_are_right_for_the_generated_events_by_construction():
    table = toy_table(20_000, seed=8)
    spectra = spectra_of(table)
    found = estimate(
        spectra, EstimatorOptions(largest_cosine=0.8), spectrum="generated"
    )
    true = accumulate(table, selected(table), table["weight"]).result().generated
    for estimator in (found.counting, found.fit):
        assert estimator.extrapolated.value == pytest.approx(true.value, rel=1e-12)
        assert estimator.factor.error > 0
    assert found.largest_cosine == 0.8
    # |c| < 0.8 keeps less asymmetric events; the fit extrapolates by itself
    assert found.counting.factor.value > 1.1
    assert found.fit.factor.value == pytest.approx(1, abs=0.05)
    assert 0.3 < found.correlation < 1


def test_the_spectrum_wanted_is_used():
    table = toy_table(20_000, seed=8, wrong_b=0.3, background=0.2)
    spectra = spectra_of(table)
    result = accumulate(table, selected(table), table["weight"]).result()
    everything = estimate(spectra)
    assert everything.spectrum == "reconstructed"
    assert everything.counting.in_range.value == pytest.approx(
        result.reconstructed.value, abs=1e-12
    )
    signal = estimate(spectra, spectrum="reconstructed_signal")
    assert signal.counting.in_range.value == pytest.approx(
        result.reconstructed_signal.value, abs=1e-12
    )
    assert signal.counting.in_range.error == pytest.approx(
        result.reconstructed_signal.error, rel=1e-9
    )


def test_an_empty_spectrum_is_missing():
    spectra = spectra_of(toy_table(5).take(slice(0, 0)))
    found = estimate(spectra)
    assert math.isnan(found.counting.extrapolated.value)
    assert math.isnan(found.fit.extrapolated.value)
    assert math.isnan(found.correlation)


def test_wrong_settings_are_explained():
    with pytest.raises(OptionError, match=r"must be a multiple of 0\.05, where bins"):
        EstimatorOptions(largest_cosine=0.93)
    with pytest.raises(OptionError, match=r"largest_cosine: must be <= 1; got 1\.5"):
        EstimatorOptions(largest_cosine=1.5)
    with pytest.raises(OptionError, match="did you mean 'generated'"):
        estimate(spectra_of(toy_table(9)), spectrum="generate")


@pytest.mark.slow
@pytest.mark.parametrize("weights", [None, mixed])
def test_errors_of_both_estimators_are_those_of_a_bootstrap(weights):
    table = toy_table(6000, seed=12, weights=weights, wrong_b=0.3, background=0.1)
    options = EstimatorOptions(largest_cosine=0.9)

    def of(count):
        sums = accumulate(table, selected(table), table["weight"] * count)
        return sums.result().estimators(options)

    found = of(1.0)
    replicas = [of(count) for count in replica_counts(table["id"], 5, 800)]
    pairs = np.array(
        [(r.counting.in_range.value, r.fit.in_range.value) for r in replicas]
    )
    errors = [found.counting.in_range.error, found.fit.in_range.error]
    # the spread of 800 replicas is known to 2.5 %; 10 % are 4 sigma
    assert pairs.std(axis=0, ddof=1) == pytest.approx(errors, rel=0.10)
    observed = np.corrcoef(pairs.T)[0, 1]
    assert observed == pytest.approx(
        found.correlation, abs=4 * (1 - found.correlation**2) / math.sqrt(800)
    )
