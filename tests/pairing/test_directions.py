"""Share of the hemisphere: the vote of all hypotheses and of 'none is right'."""

from __future__ import annotations

import awkward as ak
import numpy as np
import pytest

from tests.pairing.pair_toys import toy_arrays, toy_events
from toprecon.pairing import PairingOptions, pair
from toprecon.pairing.directions import NONE, direction_share

BEST = np.array([0])


def test_hypotheses_vote_with_their_weights():
    # ratios 4 and 1, opposite hemispheres: (4 + none/2)/(5 + none)
    chi2 = -2 * np.log([[4.0], [1.0]])
    found = direction_share(np.array([[1.0], [0.0]]), chi2, BEST)
    assert found == pytest.approx([(4 + NONE / 2) / (5 + NONE)])


def test_equal_hemispheres_add_up_and_backward_is_as_good_as_forward():
    chi2 = -2 * np.log([[4.0], [1.0]])
    for hemisphere in (0.0, 1.0):
        found = direction_share(np.full((2, 1), hemisphere), chi2, BEST)
        assert found == pytest.approx([(5 + NONE / 2) / (5 + NONE)])


def test_hopeless_hypotheses_know_nothing_of_the_hemisphere():
    found = direction_share(np.array([[1.0], [0.0]]), np.array([[5e3], [6e3]]), BEST)
    assert found == pytest.approx([0.5])


def test_masked_hypotheses_do_not_vote():
    chi2 = np.array([[0.0, np.inf], [np.inf, np.inf]])
    forward = np.array([[1.0, 1.0], [0.0, 0.0]])
    found = direction_share(forward, chi2, np.array([0, 0]))
    assert found[0] == pytest.approx((1 + NONE / 2) / (1 + NONE))
    assert np.isnan(found[1])


def test_without_likelihood_ratio_there_is_no_share():
    tops = pair(toy_events(toy_arrays()), PairingOptions())
    share = ak.to_numpy(tops.observables["pairing.direction_share"])
    assert np.isnan(share).all()
