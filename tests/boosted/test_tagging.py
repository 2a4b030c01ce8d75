from __future__ import annotations

import numpy as np
import pytest

from toprecon.boosted import (
    FeatureTable,
    TagLikelihood,
    TagOptions,
    calibrate_tag,
    passes_tag,
    roc,
    tag_rates,
    tag_score,
)
from toprecon.errors import InputError, MissingFieldError


def jets(mass, w_mass=80.0, tau_32=0.5, helicity=0.0, energy_share=0.9):
    n = len(mass)
    return {
        "groomed_mass": np.asarray(mass, dtype=float),
        "w_mass": np.full(n, w_mass),
        "tau_32": np.full(n, tau_32),
        "energy_share": np.full(n, energy_share),
        "w_helicity": np.full(n, helicity),
    }


def test_cuts_include_the_lower_limit_and_not_the_upper_one():
    options = TagOptions(mass_low=140, mass_high=210)
    tagged = passes_tag(jets([139.9, 140.0, 172.5, 210.0, np.nan]), options)
    assert tagged.tolist() == [False, True, True, False, False]


@pytest.mark.parametrize(
    ("setting", "value"),
    [
        ("w_mass_low", 85.0),
        ("w_mass_high", 75.0),
        ("tau_32_high", 0.4),
        ("energy_share_low", 0.95),
        ("w_helicity_high", -0.1),
    ],
)
def test_every_cut_can_refuse(setting, value):
    values = jets([172.5])
    assert passes_tag(values, TagOptions()).all()
    assert not passes_tag(values, TagOptions(**{setting: value})).any()


def test_score_of_a_table_by_hand():
    table = FeatureTable(name="tau_32", edges=(0.3, 0.6), log_ratio=(2.0, 0.0, -1.0))
    table = table.replace(weight=0.5)
    likelihood = TagLikelihood(features=(table,), offset=0.1)
    values = {"tau_32": np.array([0.2, 0.3, 0.7, np.nan])}
    expected = 1 / (1 + np.exp(-np.array([1.1, 0.1, -0.4])))
    np.testing.assert_allclose(tag_score(values, likelihood)[:3], expected)
    assert np.isnan(tag_score(values, likelihood)[3])
    assert np.isnan(tag_score(values, TagLikelihood())).all()


def test_the_calibrated_score_is_a_probability(rng):
    # two correlated Gaussian observables: the plain product counts them twice
    n = 20_000
    cov = [[1.0, 0.8], [0.8, 1.0]]

    def draw(shift):
        x = rng.multivariate_normal([shift, shift], cov, size=n)
        return {"groomed_mass": x[:, 0], "w_mass": x[:, 1]}

    features = ("groomed_mass", "w_mass")
    likelihood = calibrate_tag(draw(0.7), draw(-0.7), features=features)
    # each observable alone has weight 1; shared information lowers both to 1/1.8
    weights = [table.weight for table in likelihood.features]
    np.testing.assert_allclose(weights, 1 / 1.8, atol=0.08)
    signal, background = (tag_score(draw(s), likelihood) for s in (0.7, -0.7))
    for low, high in ((0.2, 0.3), (0.45, 0.55), (0.7, 0.8)):
        a = np.count_nonzero((signal > low) & (signal < high))
        b = np.count_nonzero((background > low) & (background < high))
        score = np.concatenate([signal, background])
        mean = score[(score > low) & (score < high)].mean()
        # 5 standard deviations of the share, and 3 % for the width of the bins
        assert abs(a / (a + b) - mean) < 5 * np.sqrt(0.25 / (a + b)) + 0.03
    # optimal separation: Phi(d'/sqrt(2)) with d'^2 = shift^T cov^-1 shift
    from scipy.stats import norm

    d = np.sqrt(1.4**2 * 2 / 1.8)
    assert roc(signal, background).area == pytest.approx(
        norm.cdf(d / np.sqrt(2)), abs=0.015
    )


def test_roc_of_four_fat_jets_by_hand():
    curve = roc([0.9, 0.6], [0.7, 0.1])
    assert curve.threshold.tolist() == [0.9, 0.7, 0.6, 0.1]
    assert curve.efficiency.tolist() == [0.5, 0.5, 1.0, 1.0]
    assert curve.mistag.tolist() == [0.0, 0.5, 0.5, 1.0]
    assert curve.area == pytest.approx(0.75)
    assert curve.mistag_at(1.0) == 1.0


def test_nan_scores_count_as_fat_jets_that_are_not_tagged():
    curve = roc([0.9, np.nan], [0.1, np.nan])
    assert curve.efficiency[-1] == 0.5
    assert curve.mistag[-1] == 0.5


def test_weights_act_like_repeated_fat_jets():
    a = roc([0.9, 0.2, 0.2], [0.3, 0.8])
    b = roc([0.9, 0.2], [0.3, 0.8], signal_weight=[1, 2])
    np.testing.assert_allclose(a.efficiency, b.efficiency)


def test_tag_rates_have_binomial_errors():
    rates = tag_rates([True] * 3 + [False], [False] * 10)
    assert rates.efficiency == 0.75
    assert rates.efficiency_error == pytest.approx(np.sqrt(0.75 * 0.25 / 4))
    assert rates.mistag == 0.0
    assert np.isnan(tag_rates([], [True]).efficiency)


def test_too_few_fat_jets_and_unknown_observables_are_refused():
    with pytest.raises(InputError, match=r"at least 120 signal fat jets .* got 3"):
        calibrate_tag(jets([1.0, 2, 3]), jets([1.0, 2, 3]), features=("tau_32",))
    table = FeatureTable(name="tau_23", edges=(0.5,), log_ratio=(0.0, 1.0))
    with pytest.raises(MissingFieldError, match="'tau_23'; did you mean 'tau_32'"):
        tag_score(jets([170.0]), TagLikelihood(features=(table,)))
