from __future__ import annotations

import numpy as np
import pytest

from tests.toys import selected, toy_table
from toprecon.migration import (
    MigrationMatrix,
    MigrationOptions,
    UnfoldingOptions,
    accumulate,
    simulation_covariance,
    unfold,
)

FOUR = {"edges": (-1, -0.5, 0, 0.5, 1)}
METHODS = [
    UnfoldingOptions(),
    UnfoldingOptions(method="tikhonov", strength=5.0),
    UnfoldingOptions(method="bayes", iterations=3),
]


@pytest.fixture(scope="module")
def matrix():
    table = toy_table(
        20_000,
        seed=3,
        loss=0.2,
        resolution=0.1,
        wrong_b=0.3,
        outside=0.05,
        background=0.1,
        weights=lambda rng, n: rng.exponential(1.0, n),
    )
    options = MigrationOptions(**FOUR, replicas=800)
    return accumulate(table, selected(table), table["weight"], options)


@pytest.mark.parametrize("method", METHODS, ids=lambda m: m.method)
def test_errors_of_the_simulation_are_the_spread_of_its_replicas(matrix, method):
    """The replicas hand every fluctuation of the simulated sample to the result."""
    data = matrix.reconstructed * np.array([1.2, 0.9, 1.0, 1.1])
    found = []
    for block in matrix.replicas:
        replica = MigrationMatrix.from_blocks(
            matrix.true_binning, matrix.reco_binning, block, block
        )
        found.append(unfold(replica, data, method).values)
    spread = np.cov(np.array(found).T)
    expected = simulation_covariance(matrix, data, method)
    errors = np.sqrt(np.diagonal(expected))
    # a spread of 800 is known to 2.5 %, a correlation to 0.035; 4 sigma
    assert np.sqrt(np.diagonal(spread)) == pytest.approx(errors, rel=0.10)
    correlation = expected / np.outer(errors, errors)
    assert spread / np.outer(errors, errors) == pytest.approx(correlation, abs=0.2)


def test_an_automatic_strength_is_chosen_once(matrix):
    data = matrix.reconstructed
    automatic = UnfoldingOptions(method="tikhonov")
    fixed = automatic.replace(strength=unfold(matrix, data, automatic).strength)
    assert simulation_covariance(matrix, data, automatic) == pytest.approx(
        simulation_covariance(matrix, data, fixed)
    )


def test_blocks_and_matrix_are_the_same_thing(matrix):
    block, variances = matrix.blocks()
    again = MigrationMatrix.from_blocks(
        matrix.true_binning, matrix.reco_binning, block, variances, matrix.replicas
    )
    for name, array in matrix.arrays.items():
        assert again.arrays[name] == pytest.approx(array, rel=1e-14), name
    assert (
        len(
            MigrationMatrix.from_blocks(
                matrix.true_binning, matrix.reco_binning, block, variances
            ).replicas
        )
        == 0
    )
