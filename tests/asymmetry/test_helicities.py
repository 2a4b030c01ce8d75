from __future__ import annotations

import math

import numpy as np
import pytest

from tests.toys import selected, toy_table
from toprecon.asymmetry import accumulate
from toprecon.asymmetry.helicities import NAMES, BeamRun, helicity_observables
from toprecon.errors import OptionError, StudyError
from toprecon.resampling import replica_counts
from toprecon.statistics import Measured
from toprecon.treelevel import beam_fractions

LUMINOSITY = 500.0
SIGMA = (1564.0, 724.0)


def results(background=0.1):
    """Pure beams, scaled to expected events at the luminosity."""
    out = []
    for seed, asymmetry, sigma in ((1, 0.38, SIGMA[0]), (2, 0.47, SIGMA[1])):
        table = toy_table(
            20_000,
            seed=seed,
            asymmetry=asymmetry,
            loss=0.2,
            wrong_b=0.2,
            unmatched=0.2,
            flip_backward=0.2,
            background=background,
        )
        factor = LUMINOSITY * sigma / table["is_signal"].sum()
        sums = accumulate(table, selected(table), table["weight"]).scaled(factor)
        out.append(sums.result())
    return out


def run(electron, positron, luminosity=250.0, **errors):
    return BeamRun(
        electron_polarisation=electron,
        positron_polarisation=positron,
        luminosity=luminosity,
        **errors,
    )


RUNS = (run(-0.8, 0.3), run(0.8, -0.3))


def test_values_are_those_of_the_simulation():
    left, right = results()
    found = helicity_observables(left, right, RUNS, luminosity=LUMINOSITY)
    assert found["sigma_L"].value == pytest.approx(SIGMA[0], rel=1e-12)
    assert found["sigma_R"].value == pytest.approx(SIGMA[1], rel=1e-12)
    assert found["A_L"].value == pytest.approx(left.generated.value, abs=1e-12)
    assert found["A_R"].value == pytest.approx(right.generated.value, abs=1e-12)
    assert found.left_right.value == pytest.approx(840 / 2288, rel=1e-12)
    assert found.efficiencies == (left.efficiency, right.efficiency)


def test_pure_beams_have_the_errors_of_counting():
    left, right = results(background=0.0)
    runs = (run(-1, 1, LUMINOSITY), run(1, -1, LUMINOSITY))
    found = helicity_observables(left, right, runs, luminosity=LUMINOSITY)
    for name, r, sigma in (("L", left, SIGMA[0]), ("R", right, SIGMA[1])):
        n, a = r.signal_sum, r.reconstructed_signal.value
        # Poisson: sigma/sqrt(N); binomial: sqrt((1 - A^2)/N), over the slope
        assert found[f"sigma_{name}"].error == pytest.approx(sigma / math.sqrt(n))
        assert found[f"A_{name}"].error == pytest.approx(
            math.sqrt((1 - a * a) / n) / r.flips.slope.value
        )
    assert found.correlation == pytest.approx(np.eye(4), abs=1e-9)
    total = sum(SIGMA)
    error = (
        2
        * SIGMA[0]
        * SIGMA[1]
        / total**2
        * math.hypot(
            found["sigma_L"].error / SIGMA[0], found["sigma_R"].error / SIGMA[1]
        )
    )
    assert found.left_right.error == pytest.approx(error)


def rates_of(result):
    """Rates [fb] of (signal F, B) and (background F, B)."""
    s, a = result.signal_sum, result.reconstructed_signal.value
    n, b = result.selected_sum, result.reconstructed.value
    signal = np.array([s * (1 + a), s * (1 - a)]) / 2 / LUMINOSITY
    return signal, np.array([n * (1 + b), n * (1 - b)]) / 2 / LUMINOSITY - signal


def solved(left, right, counts, runs):
    """(sigma_L, sigma_R, A_L, A_R) by solving two runs as two equations."""
    mix = np.array(
        [beam_fractions(r.electron_polarisation, r.positron_polarisation) for r in runs]
    )
    lumi = np.array([r.luminosity for r in runs])[:, None]
    background = np.array([rates_of(left)[1], rates_of(right)[1]])
    rates = np.linalg.solve(mix, counts / lumi - mix @ background)
    out = [rates[i].sum() / r.efficiency.value for i, r in enumerate((left, right))]
    for i, r in enumerate((left, right)):
        observed = (rates[i, 0] - rates[i, 1]) / rates[i].sum()
        out.append(r.corrected(Measured(observed, 0)).value)
    return np.array(out)


def expected_counts(left, right, runs):
    rates = np.array([sum(rates_of(left)), sum(rates_of(right))])
    return np.array(
        [
            r.luminosity
            * np.array(beam_fractions(r.electron_polarisation, r.positron_polarisation))
            @ rates
            for r in runs
        ]
    )


def test_the_data_covariance_is_that_of_repeated_runs(rng):
    left, right = results()
    mean = expected_counts(left, right, RUNS)
    toys = [
        solved(left, right, rng.poisson(mean).astype(float), RUNS) for _ in range(2000)
    ]
    found = helicity_observables(left, right, RUNS, luminosity=LUMINOSITY)
    spread = np.cov(np.array(toys).T)
    errors = np.sqrt(np.diagonal(found.data_covariance))
    # errors known to 1.6 %, correlations to 0.022; 4.5 sigma
    assert np.sqrt(np.diagonal(spread)) == pytest.approx(errors, rel=0.07)
    observed = spread / np.outer(*[np.sqrt(np.diagonal(spread))] * 2)
    assert observed == pytest.approx(found.correlation, abs=0.1)
    # the runs are mixes: whoever overestimates L underestimates R
    assert found.correlation[0, 1] < -0.1
    lr = [(t[0] - t[1]) / (t[0] + t[1]) for t in toys]
    assert np.std(lr) == pytest.approx(found.left_right.error, rel=0.07)
    for i, name in enumerate(("sigma_L", "sigma_R", "A_L", "A_R")):
        r = np.corrcoef(lr, [t[i] for t in toys])[0, 1]
        assert found.left_right_correlation(name) == pytest.approx(r, abs=0.1)


@pytest.mark.parametrize("which", ["electron", "positron"])
def test_polarisation_errors_are_what_a_wrong_polarisation_does(which):
    left, right = results()
    error = 1e-5  # the response is linear
    runs = (run(-0.8, 0.3, **{f"{which}_error": error}), run(0.8, -0.3))
    found = helicity_observables(left, right, runs, luminosity=LUMINOSITY)
    counts = expected_counts(left, right, RUNS)
    shifted = {"electron": run(-0.8 + error, 0.3), "positron": run(-0.8, 0.3 + error)}
    wrong = solved(left, right, counts, (shifted[which], RUNS[1]))
    right_one = solved(left, right, counts, RUNS)
    effect = np.sqrt(np.diagonal(found.polarisation_covariance))
    assert effect == pytest.approx(abs(wrong - right_one), rel=1e-3)
    assert found.covariance == pytest.approx(
        found.data_covariance + found.polarisation_covariance
    )


def test_the_text_holds_values_and_correlations():
    found = helicity_observables(*results(), RUNS, luminosity=LUMINOSITY)
    lines = str(found).splitlines()
    assert [line.split()[0] for line in lines] == [*NAMES, "A_LR"]
    assert str(found["A_R"]) in lines[3]
    assert f"{found.correlation[0, 1]:+.2f}" == lines[0].split()[-3]
    assert str(found.left_right) in lines[4]
    assert f"{found.left_right_correlation('sigma_L'):+.2f}" == lines[4].split()[-4]


def test_more_runs_than_needed_are_combined():
    left, right = results()
    two = helicity_observables(left, right, RUNS, luminosity=LUMINOSITY)
    four = helicity_observables(left, right, (*RUNS, *RUNS), luminosity=LUMINOSITY)
    assert four.data_covariance == pytest.approx(two.data_covariance / 2)


def test_impossible_requests_are_explained():
    left, right = results()
    with pytest.raises(StudyError, match="two runs with different mixes of e-L e"):
        helicity_observables(left, right, (RUNS[0], RUNS[0]), luminosity=1.0)
    with pytest.raises(StudyError, match="two runs with different mixes"):
        helicity_observables(left, right, (), luminosity=1.0)
    with pytest.raises(StudyError, match="expected events at a luminosity are requ"):
        helicity_observables(left, right, RUNS, luminosity=0.0)
    with pytest.raises(OptionError, match="luminosity: must be > 0"):
        run(0, 0, luminosity=0)


@pytest.mark.slow
def test_the_data_covariance_is_that_of_a_bootstrap_of_the_events():
    """With unit factors the simulated sample is the data; its events are resampled."""
    tables = []
    for seed, asymmetry in ((1, 0.38), (2, 0.47)):
        tables.append(
            toy_table(
                3000, seed=seed, asymmetry=asymmetry, loss=0.2, wrong_b=0.2,
                unmatched=0.2, flip_backward=0.2, background=0.1,
            )
        )  # fmt: skip

    def of(counts):
        return [
            accumulate(t, selected(t), t["weight"] * c).result()
            for t, c in zip(tables, counts, strict=True)
        ]

    left, right = of((1.0, 1.0))
    runs = (run(-1, 1, LUMINOSITY), run(1, -1, LUMINOSITY))
    found = helicity_observables(left, right, runs, luminosity=LUMINOSITY)
    n = 800
    counts = [replica_counts(t["id"], s, n) for s, t in enumerate(tables)]
    replicas = []
    for pair in zip(*counts, strict=True):
        data = np.array([sum(rates_of(r)) for r in of(pair)]) * LUMINOSITY
        replicas.append(solved(left, right, data, runs))
    spread = np.cov(np.array(replicas).T)
    # the spread of 800 replicas is known to 2.5 %; 10 % are 4 sigma
    errors = [found[name].error for name in NAMES]
    assert np.sqrt(np.diagonal(spread)) == pytest.approx(errors, rel=0.10)
    s = np.array(replicas)
    a_lr = (s[:, 0] - s[:, 1]) / (s[:, 0] + s[:, 1])
    assert a_lr.std() == pytest.approx(found.left_right.error, rel=0.10)
    # background is forward-backward symmetric, the signal is not: rate and A_FB of one
    # helicity are correlated; 0.035 each, 4 sigma
    observed = spread / np.outer(*[np.sqrt(np.diagonal(spread))] * 2)
    assert observed == pytest.approx(found.correlation, abs=0.14)
