from __future__ import annotations

import numpy as np
import pytest

from toprecon.errors import InputError
from toprecon.jets import jet_charge

P4 = np.array([[30.0, 10.0, 10.0, 5.0], [0] * 4, [0] * 4, [30.0, 10.0, 10.0, 5.0]])
CHARGE = [1.0, -1.0, 0.0, -1.0]


def test_jet_charge_of_three_particles_by_hand():
    # shares 0.6, 0.2, 0.2: 0.6^0.5 - 0.2^0.5
    charge = jet_charge(CHARGE, P4, [0, 0, 0, -1], 0.5, counts=[4], jet_counts=[1])
    assert charge.tolist() == [pytest.approx(0.6**0.5 - 0.2**0.5)]


def test_kappa_zero_counts_charges_and_a_large_kappa_takes_the_leading_one():
    kwargs = {"counts": [4], "jet_counts": [1]}
    assert jet_charge(CHARGE, P4, [0] * 4, 0.0, **kwargs)[0] == pytest.approx(-1.0)
    large = jet_charge(CHARGE, P4, [0] * 4, 50.0, **kwargs)[0]
    assert np.sign(large) == 1.0


def test_jets_of_different_events_are_kept_apart():
    charge = jet_charge(
        CHARGE, P4, [1, 0, 0, 0], 0.0, counts=[2, 1, 1], jet_counts=[2, 1, 2]
    )
    assert charge.tolist() == [-1.0, 1.0, 0.0, -1.0, 0.0]


def test_jet_charge_changes_sign_with_the_charges(rng):
    n = 50
    p4 = np.abs(rng.normal(size=(4, n)))
    q = rng.integers(-1, 2, size=n)
    index = rng.integers(-1, 3, size=n)
    kwargs = {"counts": [20, 30], "jet_counts": [3, 3]}
    np.testing.assert_array_equal(
        jet_charge(q, p4, index, 0.3, **kwargs),
        -jet_charge(-q, p4, index, 0.3, **kwargs),
    )


def test_wrong_lengths_and_indices_are_refused():
    with pytest.raises(InputError, match="one charge and one jet index per particle"):
        jet_charge([1.0], P4, [0] * 4, 0.5, counts=[4], jet_counts=[1])
    with pytest.raises(InputError, match=r"below the number of jets.*got 0 \.\. 1"):
        jet_charge(CHARGE, P4, [0, 0, 0, 1], 0.5, counts=[4], jet_counts=[1])
