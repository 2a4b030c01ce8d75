from __future__ import annotations

import numpy as np
import pytest

from tests.pairing.fit_toys import (
    EXACT,
    assignment_of,
    events_of,
    measure,
    momenta_of,
    partons,
)
from toprecon import kinematics
from toprecon.events import Channel, Status
from toprecon.pairing.fit_blocks import fit
from toprecon.pairing.fit_result import FIT_OBSERVABLES


@pytest.fixture
def result(rng):
    """Eight events with three assignments each: none, right and b-swapped."""
    p, _ = partons(rng, 8)
    _, measured = measure(rng, p)
    right = assignment_of(8)
    swapped = right[:, [3, 1, 2, 0, 4, 5]]
    rows = np.stack([np.full_like(right, -1), right, swapped], axis=1)
    rows[7] = -1
    return fit(
        events_of(momenta_of(measured)), rows, EXACT, channel=Channel.LEPTON_JETS
    )


def test_the_lowest_chi_square_ignores_failed_fits(result):
    lowest = result.lowest()
    assert lowest[7] == -1
    assert np.all(lowest[:7] > 0)
    best = result.take(lowest)
    assert best.chi2.shape == (8,)
    assert best.status[7] == Status.TOO_FEW_OBJECTS
    np.testing.assert_array_equal(best.chi2[:7], np.nanmin(result.chi2[:7], axis=1))
    np.testing.assert_array_equal(best.top[:, 0], result.top[:, 0, lowest[0]])
    assert best.pulls.shape == (8, 6, 3)


def test_no_assignment_at_all_is_no_choice(result):
    empty = np.empty((3, 0, 6), int)
    p, _ = partons(np.random.default_rng(1), 3)
    none = fit(events_of(p), empty, channel=Channel.LEPTON_JETS)
    assert none.lowest().tolist() == [-1, -1, -1]


def test_failed_fits_hold_no_numbers(result):
    failed = ~result.success
    assert failed.any()
    for values in (result.chi2, result.probability, result.cos_theta_error):
        assert np.isnan(values[failed]).all()
    for values in (result.momenta, result.photon, result.top, result.neutrino):
        assert np.isnan(values[:, failed]).all()


def test_the_parts_add_up_to_the_pair(result):
    good = result.success
    total = (result.top + result.antitop + result.photon)[:, good]
    # tolerance of the constraints
    np.testing.assert_allclose(total[0], 500.0, atol=2e-3)
    np.testing.assert_allclose(total[1:], 0.0, atol=1e-9)
    w = (result.lepton + result.neutrino)[:, good]
    np.testing.assert_allclose(w, result.w_minus[:, good], atol=1e-9)
    np.testing.assert_allclose(kinematics.mass(w), 80.379, atol=2e-3)
    np.testing.assert_allclose(
        kinematics.mass(result.w_plus[:, good]), 80.379, atol=2e-3
    )
    masses = [kinematics.mass(t[:, good]) for t in (result.top, result.antitop)]
    np.testing.assert_allclose(*masses, atol=4e-3)


def test_observables_are_the_declared_ones(result):
    columns = result.observables()
    assert list(columns) == [observable.name for observable in FIT_OBSERVABLES]
    assert all(values.shape == result.status.shape for values in columns.values())


def test_the_summary_counts_what_failed(result):
    counts = result.counts()
    assert sum(counts.values()) == 24
    assert counts[Status.TOO_FEW_OBJECTS] == 10
    text = str(result)
    assert f"{counts[Status.OK]} of 24 converged" in text
    assert "10 too few objects" in text
    assert "4 degrees of freedom" in text
