from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from tests.pairing import fit_reference
from tests.pairing.fit_toys import EXACT, measure, partons
from toprecon.pairing.fit_errors import finish
from toprecon.pairing.fit_model import Model
from toprecon.pairing.fit_photon import radiator_exponent
from toprecon.pairing.fit_solver import cholesky, solve, solve_lower

CHANNELS = pytest.mark.parametrize("leptonic", [True, False])


def converged_share(rng, n, sqrt_s, options, *, leptonic, **kind):
    p, _ = partons(rng, n, sqrt_s, **kind)
    _, measured = measure(rng, p, sqrt_s, leptonic=leptonic)
    return solve(Model(options, leptonic), measured).converged.mean()


def test_the_factors_are_those_of_numpy(rng):
    a = rng.normal(size=(20, 5, 9))
    s = a @ a.swapaxes(1, 2)
    expected = np.linalg.cholesky(s)
    found = cholesky(s.transpose(1, 2, 0))
    lower = np.tril(np.ones((5, 5), bool))
    # pure arithmetic
    np.testing.assert_allclose(
        found.transpose(2, 0, 1)[:, lower], expected[:, lower], rtol=1e-10
    )
    right = rng.normal(size=(5, 20))
    solved = solve_lower(found, right)
    np.testing.assert_allclose(
        np.einsum("nij,nj->ni", expected, solved.T), right.T, atol=1e-10
    )


@CHANNELS
@pytest.mark.parametrize("masses", ["equal", "fixed"])
def test_pulls_are_normal_and_the_probability_is_flat(rng, leptonic, masses):
    model = Model(EXACT.replace(top_masses=masses), leptonic)
    p, _ = partons(rng, 4096)
    _, measured = measure(rng, p, leptonic=leptonic)
    solution = solve(model, measured)
    good = solution.converged
    assert good.mean() >= 0.999
    pulls = finish(model, measured, solution).pulls[..., good]
    # statistical errors of 4096 pulls are 0.016 and 0.011: 3 and 9 of them
    assert np.abs(pulls.mean(axis=-1)).max() < 0.05
    assert np.abs(pulls.std(axis=-1) - 1).max() < 0.1
    probability = stats.chi2.sf(solution.chi2[good], model.n_constraints)
    # probability of failing by chance: 1e-3
    assert stats.kstest(probability, "uniform").pvalue > 1e-3


@CHANNELS
def test_the_error_of_the_top_direction_is_right(rng, leptonic):
    model = Model(EXACT, leptonic)
    p, _ = partons(rng, 4096)
    _, measured = measure(rng, p, leptonic=leptonic)
    solution = solve(model, measured)
    final = finish(model, measured, solution)
    good = solution.converged
    for side in (0, 1):
        truth, fitted = (
            q[3 * side : 3 * side + 3].sum(axis=0) for q in (p, final.momenta)
        )
        cosines = [q[3] / np.sqrt((q[1:] ** 2).sum(axis=0)) for q in (truth, fitted)]
        pull = ((cosines[1] - cosines[0]) / final.cos_theta_error[side])[good]
        low, high = np.percentile(pull, [16, 84])
        # error of the half width 0.02; the linear propagation is good to a few %
        assert (high - low) / 2 == pytest.approx(1.0, abs=0.1)


@CHANNELS
def test_the_minimum_is_that_of_sequential_quadratic_programming(rng, leptonic):
    options = EXACT.replace(tolerance=1e-5, chi2_tolerance=1e-6)
    model = Model(options, leptonic)
    p, _ = partons(rng, 100)
    _, measured = measure(rng, p, leptonic=leptonic)
    solution = solve(model, measured)
    assert solution.converged.all()
    for i in range(100):
        success, chi2, x = fit_reference.slsqp(fit_reference.one(measured, i))
        assert success
        # stopping rules of both
        assert solution.chi2[i] == pytest.approx(chi2, abs=2e-4)
        shift = (solution.x[..., i] - x) / measured.sigma[..., i]
        assert np.abs(shift).max() < 2e-2


@CHANNELS
def test_the_minimum_with_a_photon_is_that_of_a_search_over_its_energy(rng, leptonic):
    options = EXACT.replace(isr=True, tolerance=1e-5, chi2_tolerance=1e-6)
    p, photon = partons(rng, 400, isr=True)
    _, measured = measure(rng, p, leptonic=leptonic)
    hard = np.flatnonzero(np.abs(photon) > 40)[:10]
    assert len(hard) == 10
    solution = solve(Model(options, leptonic), measured.take(hard))
    for n, i in enumerate(hard):
        chi2, energy = fit_reference.slsqp_with_photon(
            fit_reference.one(measured, i), solution.side[n], radiator_exponent(500.0)
        )
        # stopping rules of both; the search is over an interval of 1 to 150 GeV
        assert solution.chi2[n] == pytest.approx(chi2, abs=1e-3)
        assert solution.photon[n] == pytest.approx(energy, abs=0.1)


def test_soft_constraints_are_those_of_unconstrained_least_squares(rng):
    options = EXACT.replace(
        energy_width=3.0,
        w_width=2.0,
        top_width=1.5,
        tolerance=1e-5,
        chi2_tolerance=1e-6,
    )
    model = Model(options, has_neutrino=True)
    p, _ = partons(rng, 30, widths=True)
    _, measured = measure(rng, p)
    solution = solve(model, measured)
    assert solution.converged.all()
    widths = (3.0, 2.0, 1.5 * np.sqrt(2))
    for i in range(30):
        expected = fit_reference.soft_least_squares(
            fit_reference.one(measured, i), widths
        )
        assert solution.chi2[i] == pytest.approx(expected, abs=1e-4, rel=1e-5)


def test_a_loop_with_the_neutrino_as_parameter_finds_the_same(rng):
    p, _ = partons(rng, 50)
    _, measured = measure(rng, p)
    solution = solve(Model(EXACT, has_neutrino=True), measured)
    loop = [fit_reference.loop(fit_reference.one(measured, i)) for i in range(50)]
    # both stop when the chi-square changes by less than 1e-3
    np.testing.assert_allclose(solution.chi2, loop, atol=2e-3)


@CHANNELS
@pytest.mark.parametrize("sqrt_s", [365.0, 500.0, 1000.0])
def test_fits_of_natural_widths_converge(rng, leptonic, sqrt_s):
    share = converged_share(rng, 4096, sqrt_s, EXACT, leptonic=leptonic, widths=True)
    assert share >= 0.998


@CHANNELS
@pytest.mark.parametrize("sqrt_s", [365.0, 500.0, 1000.0])
def test_fits_with_a_photon_converge(rng, leptonic, sqrt_s):
    share = converged_share(
        rng,
        2048,
        sqrt_s,
        EXACT.replace(isr=True),
        leptonic=leptonic,
        widths=True,
        isr=True,
    )
    assert share >= 0.998


def test_adapted_steps_rescue_fits_that_full_steps_lose(rng):
    kind = {"leptonic": True, "widths": True}
    adapted = converged_share(rng, 4096, 365.0, EXACT, **kind)
    full = converged_share(rng, 4096, 365.0, EXACT.replace(full_steps=30), **kind)
    assert adapted > full + 0.01


@CHANNELS
def test_the_photon_is_found(rng, leptonic):
    model = Model(EXACT.replace(isr=True), leptonic)
    p, photon = partons(rng, 2048, isr=True)
    _, measured = measure(rng, p, leptonic=leptonic)
    solution = solve(model, measured)
    fitted = solution.side * solution.photon
    hard = np.abs(photon) > 30
    # the rest is balanced as well by other shifts: seen 2.3 and 0.4 %, error 0.7 %
    assert np.mean(np.sign(fitted[hard]) == np.sign(photon[hard])) > 0.95
    assert np.median(np.abs(fitted - photon)[hard]) < 5.0
    # a photon is claimed falsely in few events
    soft = np.abs(photon) < 0.1
    assert np.mean(solution.side[soft] != 0) < 0.15


def test_without_a_required_gain_the_lowest_chi_square_wins(rng):
    p, _ = partons(rng, 500)
    _, measured = measure(rng, p)
    lowest = solve(Model(EXACT.replace(isr=True, isr_gain=0.0), True), measured)
    gain = solve(Model(EXACT.replace(isr=True), True), measured)
    none = solve(Model(EXACT, True), measured)
    assert np.all(lowest.chi2 <= gain.chi2)
    assert np.all(gain.chi2 <= none.chi2)
    changed = gain.side != 0
    assert np.all(none.chi2[changed] - gain.chi2[changed] > 2.0)
    assert np.count_nonzero(lowest.side) > np.count_nonzero(gain.side)


def test_fits_that_a_photon_cannot_improve_are_spared_the_attempt(rng):
    p, _ = partons(rng, 300)
    _, measured = measure(rng, p)
    none = solve(Model(EXACT, True), measured)
    photon = solve(Model(EXACT.replace(isr=True), True), measured)
    spared = none.chi2 <= 2.0
    assert 0.1 < spared.mean() < 0.5
    np.testing.assert_array_equal(
        photon.n_iterations[spared], none.n_iterations[spared]
    )
    np.testing.assert_array_equal(photon.chi2[spared], none.chi2[spared])
    assert np.all(photon.n_iterations[~spared] > none.n_iterations[~spared])
    nothing = solve(Model(EXACT.replace(isr=True, isr_gain=1e6), True), measured)
    np.testing.assert_array_equal(nothing.chi2, none.chi2)


def test_unusable_numbers_do_not_disturb_their_block(rng):
    p, _ = partons(rng, 60)
    _, measured = measure(rng, p)
    alone = solve(Model(EXACT, True), measured)
    for i, bad in enumerate((np.nan, np.inf, 0.0, 1e300, -50.0)):
        measured.values[1, 0, i] = bad
    together = solve(Model(EXACT, True), measured)
    np.testing.assert_array_equal(together.chi2[5:], alone.chi2[5:])
    assert not together.converged[:2].any()


def test_the_default_stopping_rule_is_good_to_a_thousandth(rng):
    p, _ = partons(rng, 2000, 365.0, widths=True)
    _, measured = measure(rng, p, 365.0)
    loose = solve(Model(EXACT, True), measured)
    tight = EXACT.replace(tolerance=1e-6, chi2_tolerance=1e-7, max_iterations=200)
    tight = solve(Model(tight, True), measured)
    both = loose.converged & tight.converged
    assert both.mean() > 0.998
    # linear convergence: the worst of 2 000 has about 20 times its last change left
    assert np.quantile(np.abs(loose.chi2 - tight.chi2)[both], 0.99) < 1e-3
    np.testing.assert_allclose(loose.chi2[both], tight.chi2[both], atol=0.05)


def test_the_fit_stops_at_the_largest_number_of_steps(rng):
    p, _ = partons(rng, 100, widths=True)
    _, measured = measure(rng, p)
    solution = solve(Model(EXACT.replace(max_iterations=2), True), measured)
    assert solution.n_iterations.max() == 2
    assert not solution.converged.all()
