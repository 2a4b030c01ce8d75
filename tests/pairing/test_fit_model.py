from __future__ import annotations

import numpy as np
import pytest

from tests.pairing.fit_toys import EXACT, measure, partons
from toprecon.pairing.fit_model import Measured, Model, linearise, photon_momentum
from toprecon.pairing.fit_options import TopMasses

CHANNELS = pytest.mark.parametrize("leptonic", [True, False])


@CHANNELS
@pytest.mark.parametrize(
    ("masses", "extra"), [(TopMasses.EQUAL, 0), (TopMasses.FIXED, 1)]
)
def test_seven_constraints_hadronic_and_four_with_a_neutrino(leptonic, masses, extra):
    # 4 balance + 2 W masses + 1 top mass difference, less 3 of the neutrino
    model = Model(EXACT.replace(top_masses=masses), has_neutrino=leptonic)
    assert model.n_constraints == (4 if leptonic else 7) + extra


@CHANNELS
def test_each_constraint_can_be_switched_off(leptonic):
    model = Model(EXACT.replace(w_masses=False), has_neutrino=leptonic)
    assert model.n_constraints == (2 if leptonic else 5)
    model = Model(EXACT.replace(top_masses="free"), has_neutrino=leptonic)
    assert model.n_constraints == (3 if leptonic else 6)
    hadronic = Model(EXACT.replace(four_momentum=False), has_neutrino=False)
    assert hadronic.n_constraints == 3
    assert not hadronic.photon


@CHANNELS
@pytest.mark.parametrize("masses", list(TopMasses))
def test_the_truth_obeys_the_constraints(rng, leptonic, masses):
    p, photon = partons(rng, 200, isr=True)
    true, measured = measure(rng, p, leptonic=leptonic)
    model = Model(EXACT.replace(top_masses=masses), has_neutrino=leptonic)
    point = linearise(model, measured, true, np.abs(photon), np.sign(photon))
    # decays and boosts of 500 GeV momenta in double precision
    np.testing.assert_allclose(point.violation, 0.0, atol=1e-8)
    np.testing.assert_allclose(point.momenta, p, atol=1e-8)


@CHANNELS
@pytest.mark.parametrize("masses", list(TopMasses))
@pytest.mark.parametrize("crossing_angle", [0.0, 0.02])
def test_slopes_equal_finite_differences(rng, leptonic, masses, crossing_angle):
    options = EXACT.replace(top_masses=masses, crossing_angle=crossing_angle)
    model = Model(options, has_neutrino=leptonic)
    p, _ = partons(rng, 20)
    _, measured = measure(rng, p, leptonic=leptonic)
    x = measured.values
    photon, side = rng.uniform(5, 50, 20), rng.choice([-1.0, 1.0], 20)
    point = linearise(model, measured, x, photon, side)
    numeric = np.empty_like(point.slopes)
    step = 1e-4
    for i in range(x.shape[0]):
        for j in range(3):
            shift = np.zeros_like(x)
            shift[i, j] = step * measured.sigma[i, j]
            up = linearise(model, measured, x + shift, photon, side).violation
            down = linearise(model, measured, x - shift, photon, side).violation
            numeric[:, 3 * i + j] = (up - down) / (2 * step)
    up = linearise(model, measured, x, photon + step, side).violation
    down = linearise(model, measured, x, photon - step, side).violation
    numeric[:, -1] = (up - down) / (2 * step)
    # rounding of values up to 500 GeV over a step of 1e-4, entries up to 100 GeV
    np.testing.assert_allclose(point.slopes, numeric, atol=1e-6, rtol=1e-7)


@CHANNELS
def test_slopes_of_momenta_equal_finite_differences(rng, leptonic):
    model = Model(EXACT, has_neutrino=leptonic)
    p, _ = partons(rng, 10)
    _, measured = measure(rng, p, leptonic=leptonic)
    x = measured.values
    point = linearise(model, measured, x)
    step = 1e-4
    for j in range(3):
        shift = np.zeros_like(x)
        shift[:, j] = step * measured.sigma[:, j]
        up = linearise(model, measured, x + shift).momenta[: len(x)]
        down = linearise(model, measured, x - shift).momenta[: len(x)]
        numeric = ((up - down) / (2 * step))[:, 1:].swapaxes(0, 1)
        np.testing.assert_allclose(
            point.directions[:, :, j], numeric, atol=1e-7, rtol=1e-7
        )


def test_the_photon_follows_the_beams_of_a_crossing_angle():
    k, side = np.array([10.0, 10.0, 10.0]), np.array([1.0, -1.0, 0.0])
    p = photon_momentum(k, side, 0.02)
    assert p[0].tolist() == [10.0, 10.0, 0.0]
    np.testing.assert_allclose(p[1], [10 * np.sin(0.01)] * 2 + [0.0])
    np.testing.assert_allclose(p[3], [10 * np.cos(0.01), -10 * np.cos(0.01), 0.0])
    # massless
    np.testing.assert_allclose(p[0] ** 2, (p[1:] ** 2).sum(axis=0))


def test_a_part_of_a_block_is_taken_by_mask(rng):
    p, _ = partons(rng, 5)
    _, measured = measure(rng, p)
    part = measured.take(np.array([True, False, True, False, False]))
    assert isinstance(part, Measured)
    np.testing.assert_array_equal(part.values, measured.values[..., [0, 2]])
    np.testing.assert_array_equal(part.sqrt_s, measured.sqrt_s[[0, 2]])
