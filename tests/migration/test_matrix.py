from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.toys import selected, toy_table
from toprecon.errors import OptionError, StudyError
from toprecon.events import Binning, EventTable
from toprecon.migration import MigrationMatrix, MigrationOptions, accumulate
from toprecon.resampling import replica_counts

CAUSES = {
    "loss": 0.2,
    "resolution": 0.15,
    "wrong_b": 0.2,
    "unmatched": 0.2,
    "charge": 0.1,
    "outside": 0.05,
    "background": 0.1,
}
THREE = MigrationOptions(edges=(-1, -0.2, 0.2, 1))


def exponential(rng, n):
    return rng.exponential(1.0, n)


def matrix_of(table, options=None):
    return accumulate(table, selected(table), table["weight"], options)


def hand_made(true, reco, **changes):
    """A table with given angles, all signal and selected unless changed."""
    n = len(true)
    base = toy_table(n)
    columns = {name: column.copy() for name, column in base.columns.items()}
    columns["cos_theta_true"] = np.array(true, float)
    columns["cos_theta_reco"] = np.array(reco, float)
    columns.update({name: np.array(values) for name, values in changes.items()})
    return EventTable(columns, base.samples, base.stages)


def test_a_table_made_by_hand_gives_the_matrix_made_by_hand():
    table = hand_made(
        [-0.9, -0.9, -0.9, 0.0, 0.5, 0.5, 0.5, 1.0],
        [-0.5, 0.5, -0.9, 0.1, 0.9, -0.9, -0.1, 1.0],
        stage=[0, 0, 1, 0, 0, 0, 0, 0],
        weight=[1, 2, 3, 1, 1, 1, 1, 0.5],
    )
    m = matrix_of(table, THREE)
    assert m.counts.tolist() == [[1, 0, 2], [0, 1, 0], [1, 1, 1.5]]
    assert m.counts_variances.tolist() == [[1, 0, 4], [0, 1, 0], [1, 1, 1.25]]
    assert m.missed.tolist() == [3, 0, 0]
    assert m.generated.tolist() == [6, 1, 3.5]
    assert m.generated_variances.tolist() == [14, 1, 3.25]
    assert m.efficiency.tolist() == [0.5, 1, 1]
    assert m.response.tolist() == [[1 / 6, 0, 2 / 6], [0, 1, 0], [2 / 7, 2 / 7, 3 / 7]]
    assert m.migration[0].tolist() == [1 / 3, 0, 2 / 3]
    assert m.purity.tolist() == [0.5, 0.5, 1.5 / 3.5]
    assert m.stability.tolist() == [1 / 3, 1, 1.5 / 3.5]
    assert m.anti_diagonal.tolist() == [2 / 3, 1, 1 / 3.5]
    assert m.reconstructed.tolist() == [2, 2, 3.5]
    # passed 3 (S = 5) and missed 3 (S = 9) of 6: sqrt(9*5 + 9*9)/36
    assert m.efficiency_error[0] == pytest.approx(np.sqrt(126) / 36)


def test_membership_follows_the_truth_phase_space_and_never_the_class():
    table = hand_made(
        [-0.9, -0.9, 0.5, np.nan, -0.9],
        [-0.9, -0.9, 0.5, 0.9, np.nan],
        is_signal=[True, False, True, False, True],
        sample=[0, 0, 0, 1, 0],
        pairing_class=[2, 1, 0, 1, 2],
        status=[0, 0, 0, 0, 2],
    )
    m = matrix_of(table, THREE)
    assert np.diagonal(m.counts).tolist() == [1, 0, 1]
    assert m.missed.tolist() == [1, 0, 0]  # signal without a reconstructed pair
    assert m.from_outside.tolist() == [1, 0, 0]
    assert m.background.tolist() == [0, 0, 1]


def test_events_outside_the_edges_are_missed_or_from_outside():
    options = MigrationOptions(edges=(-0.5, 0, 0.5), reco_edges=(-0.8, 0, 0.8))
    table = hand_made([-0.4, -0.4, 0.7, 0.3], [-0.7, 0.9, 0.3, 0.8])
    m = matrix_of(table, options)
    assert m.counts.tolist() == [[1, 0], [0, 1]]  # the last bin has its upper edge
    assert m.missed.tolist() == [1, 0]
    assert m.from_outside.tolist() == [0, 1]


@given(st.integers(0, 2**31), st.integers(0, 400))
def test_generated_is_counts_plus_missed_and_chunks_add_up(seed, border):
    table = toy_table(400, seed=seed, weights=exponential, **CAUSES)
    options = MigrationOptions(replicas=3)
    whole = matrix_of(table, options)
    assert whole.generated == pytest.approx(
        whole.counts.sum(axis=1) + whole.missed, rel=1e-12
    )
    parts = [
        matrix_of(table.take(rows), options)
        for rows in (slice(0, border), slice(border, None))
    ]
    total = parts[0] + parts[1]
    for name, array in whole.arrays.items():
        assert total.arrays[name] == pytest.approx(array, abs=1e-11), name
    signal = table["is_signal"]
    assert whole.generated.sum() == pytest.approx(table["weight"][signal].sum())
    assert (
        whole.counts.sum() + whole.from_outside.sum() + whole.background.sum()
    ) == pytest.approx(table["weight"][selected(table)].sum())


@given(st.floats(1e-3, 1e3))
def test_scaled_matrices_are_those_of_scaled_weights(factor):
    table = toy_table(300, seed=3, weights=exponential, **CAUSES)
    options = MigrationOptions(replicas=2)
    scaled = matrix_of(table, options).scaled(factor)
    direct = accumulate(table, selected(table), factor * table["weight"], options)
    for name, array in direct.arrays.items():
        assert scaled.arrays[name] == pytest.approx(array, rel=1e-12), name
    assert scaled.response == pytest.approx(
        matrix_of(table, options).response, rel=1e-12
    )


def test_covariance_of_the_response_is_the_multinomial_one_for_unit_weights():
    m = matrix_of(toy_table(3000, seed=3, **CAUSES))
    for t in range(len(m.true_binning)):
        r, n = m.response[t], m.generated[t]
        # Cov(R_i, R_k) = [d_ik R_i - R_i R_k]/N, the multinomial of any textbook
        assert m.response_covariance(t) == pytest.approx(
            (np.diag(r) - np.outer(r, r)) / n, abs=1e-15
        )


@pytest.mark.parametrize("weights", [None, exponential])
def test_covariance_of_the_response_is_the_spread_of_replicas(weights):
    table = toy_table(4000, seed=13, weights=weights, **CAUSES)
    m = matrix_of(table, MigrationOptions(edges=(-1, -0.2, 0.2, 1), replicas=1500))
    block = m.replicas
    counts, generated = block[:, :3, :-1], block[:, :3].sum(axis=2)
    responses = counts / generated[:, :, None]
    for t in range(3):
        spread = np.cov(responses[:, t].T)
        analytic = m.response_covariance(t)
        # an element of a covariance of 1500 replicas is known to
        # sqrt((C_ij^2 + C_ii C_jj)/1500); 4.5 sigma on 2 x 18 elements, 2e-4
        d = np.diagonal(analytic)
        error = np.sqrt((analytic**2 + np.outer(d, d)) / 1500)
        assert np.all(abs(spread - analytic) < 4.5 * error + 0.03 * abs(analytic))


def test_one_count_per_event_multiplies_everything_in_a_replica():
    table = toy_table(800, seed=2, weights=exponential, **CAUSES)
    m = matrix_of(table, MigrationOptions(replicas=4, seed=9))
    counts = replica_counts(table["id"], 9, 4)
    for index in range(4):
        direct = accumulate(table, selected(table), table["weight"] * counts[index])
        for name, array in m.replica(index).items():
            assert array == pytest.approx(getattr(direct, name), abs=1e-11), name


def test_expected_data_have_the_poisson_covariance():
    m = matrix_of(toy_table(500, **CAUSES))
    assert np.array_equal(m.data_covariance(), np.diag(m.reconstructed))


def test_singular_values_and_condition_are_those_of_the_response():
    m = matrix_of(hand_made([-0.9, -0.9, 0.0, 0.5], [-0.9, 0.5, 0.0, 0.5]), THREE)
    product = m.response.T @ m.response
    expected = np.sqrt(np.sort(np.linalg.eigvalsh(product))[::-1])
    assert m.singular_values == pytest.approx(expected, abs=1e-12)
    assert m.condition == pytest.approx(expected[0] / expected[-1])
    same = hand_made([-0.9, 0.0, 0.5], [0.5, 0.5, 0.5])
    assert matrix_of(same, THREE).condition > 1e15


def test_an_empty_bin_is_missing_and_an_empty_table_works():
    m = matrix_of(hand_made([-0.9, 0.5], [-0.9, 0.5]), THREE)
    assert np.isnan(m.efficiency[1])
    assert np.isnan(m.response[1]).all()
    assert np.isnan(m.singular_values).all()
    empty = matrix_of(toy_table(4).take(slice(0, 0)), MigrationOptions(replicas=1))
    assert empty.generated.sum() == 0
    assert str(empty) == "migration matrix 10 x 10, empty"


def test_text_says_the_size_and_the_share_selected():
    m = matrix_of(hand_made([-0.9, 0.5], [-0.9, 0.5], stage=[0, 1]), THREE)
    assert str(m) == "migration matrix 3 x 3, 50.0% of the generated selected"


def test_different_binnings_have_no_diagonal():
    options = MigrationOptions(edges=(-1, 0, 1), reco_edges=(-1, 0.1, 1))
    m = matrix_of(toy_table(50), options)
    for name in ("purity", "stability", "anti_diagonal"):
        with pytest.raises(StudyError, match="equal generated and reconstructed bins"):
            getattr(m, name)
    skew = matrix_of(toy_table(50), MigrationOptions(edges=(-1, 0.1, 1)))
    with pytest.raises(StudyError, match="bins symmetric about 0 are required"):
        _ = skew.anti_diagonal


def test_unequal_matrices_cannot_be_added():
    table = toy_table(50)
    m = matrix_of(table)
    with pytest.raises(StudyError, match="equal bins are required to add them"):
        _ = m + matrix_of(table, THREE)
    with pytest.raises(StudyError, match="equally many replicas are required"):
        _ = m + matrix_of(table, MigrationOptions(replicas=2))
    assert not m.equals(matrix_of(table, THREE))
    assert m.equals(matrix_of(table))


def test_arrays_must_fit_the_bins():
    m = matrix_of(toy_table(50), THREE)
    arrays = {**m.arrays, "missed": np.zeros(4)}
    with pytest.raises(StudyError, match=r"missed must have the shape \(3,\)"):
        MigrationMatrix(m.true_binning, m.reco_binning, **arrays)


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"edges": (0.0,)}, "edges: at least two are required"),
        ({"edges": (0.0, 0.0, 1.0)}, "edges: must be finite and strictly increasing"),
        ({"edges": (-2.0, 1.0)}, r"edges: must lie in \[-1, 1\]"),
        ({"reco_edges": (1.0, -1.0)}, "reco_edges: must be finite and strictly"),
        ({"replicas": -1}, "replicas: must be >= 0; got -1"),
        ({"seed": -1}, "seed: must be >= 0; got -1"),
        ({"replica": 3}, "replica: unknown option; did you mean 'replicas'"),
    ],
)
def test_wrong_options_are_explained(settings, message):
    with pytest.raises(OptionError, match=message):
        MigrationOptions(**settings)


def test_reconstructed_bins_are_the_generated_ones_unless_given():
    assert THREE.reco_binning == THREE.true_binning == Binning((-1.0, -0.2, 0.2, 1.0))
    other = MigrationOptions(edges=(-1, 1), reco_edges=(-1, 0, 1))
    assert other.reco_binning == Binning((-1.0, 0.0, 1.0))
