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
from toprecon.events import Channel
from toprecon.pairing.fit_inputs import finite_fits, first_status, prepare

LJ, HAD = Channel.LEPTON_JETS, Channel.ALL_HADRONIC


def test_measurements_are_those_of_the_objects(rng):
    p, _ = partons(rng, 6)
    _, measured = measure(rng, p)
    inputs = prepare(events_of(momenta_of(measured)), assignment_of(6), EXACT, LJ)
    again = inputs.measured(np.arange(6), EXACT)
    np.testing.assert_allclose(again.values, measured.values, rtol=1e-12)
    np.testing.assert_allclose(again.velocity, measured.velocity, rtol=1e-12)
    # resolutions are taken at the measured energy
    e = measured.values[1, 0]
    np.testing.assert_allclose(again.sigma[1, 0], 0.6 * np.sqrt(e), rtol=1e-12)
    np.testing.assert_allclose(
        again.sigma[1, 2], 0.01 / np.sin(measured.values[1, 1]), rtol=1e-12
    )


def test_energies_are_divided_by_the_response(rng):
    p, _ = partons(rng, 3)
    options = EXACT.replace(b_jet=EXACT.b_jet.replace(response=0.5))
    inputs = prepare(events_of(p), assignment_of(3), options, LJ)
    values = inputs.measured(np.arange(3), options).values
    np.testing.assert_allclose(values[0, 0], 2 * p[0, 0])
    np.testing.assert_allclose(values[1, 0], p[1, 0])
    np.testing.assert_allclose(values[3, 0], 2 * p[3, 0])
    np.testing.assert_allclose(values[4, 0], p[4, 0])


def test_the_hadronic_side_comes_first(rng):
    p, _ = partons(rng, 2)
    assignment = np.array([[0, 1, 2, 3, -1, -1], [3, -1, -1, 0, 1, 2]])
    inputs = prepare(events_of(p), assignment, EXACT, LJ)
    assert inputs.leptonic_side.tolist() == [-1, 1]
    assert inputs.jet_index[:, :4].tolist() == [[0, 1, 2, 3]] * 2
    assert inputs.usable.all()


@pytest.mark.parametrize(
    "row",
    [
        [0, 1, 2, 3, 2, 1],
        [0, -1, -1, 3, -1, -1],
        [-1] * 6,
        [0, 1, 1, 3, -1, -1],
        [0, 1, 9, 3, -1, -1],
        [0, -1, 2, 3, -1, -1],
    ],
    ids=["no lepton", "two leptons", "nothing", "twice", "beyond", "half"],
)
def test_what_is_not_an_assignment_is_not_tried(rng, row):
    p, _ = partons(rng, 1)
    inputs = prepare(events_of(p), np.array([row]), EXACT, LJ)
    assert not inputs.usable.any()
    assert first_status(inputs).tolist() == [2]


def test_six_jets_are_needed_without_a_lepton(rng):
    p, _ = partons(rng, 2)
    events = events_of(p, leptonic=False)
    rows = np.array([[0, 1, 2, 3, 4, 5], [0, 1, 2, 3, -1, -1]])
    assert prepare(events, rows, EXACT, HAD).usable.tolist() == [True, False]


def test_objects_without_direction_or_energy_are_not_finite(rng):
    p, _ = partons(rng, 5)
    p[0, :, 0] = 0.0
    p[1, 1:, 1] = 0.0
    p[2, 0, 2] = np.nan
    p[3, 0, 3] = -5.0
    inputs = prepare(events_of(p), assignment_of(5), EXACT, LJ)
    block = inputs.measured(np.arange(5), EXACT)
    assert finite_fits(block).tolist() == [False, False, False, False, True]
