"""Squared matrix element and the weights made from it."""

from __future__ import annotations

import awkward as ak
import numpy as np
import pytest

from tests.generation.conftest import plain
from toprecon.errors import MissingFieldError
from toprecon.events import components
from toprecon.generation import (
    GenerationOptions,
    angle_weights,
    coupling_weights,
    generate,
    matrix_element,
)
from toprecon.generation.spin import amplitude_matrix, spin_couplings
from toprecon.kinematics import cos_theta, mass, momentum, to_rest_frame
from toprecon.treelevel import (
    FormFactors,
    cross_section,
    forward_backward_asymmetry,
    vertex,
)

STRONG = FormFactors(
    f2v_photon=0.1, f2a_photon=0.3, f2v_z=-0.2, f2a_z=0.25, f1a_photon=0.1
)


@pytest.mark.parametrize("helicity", ["LR", "RL"])
@pytest.mark.parametrize("form_factors", [FormFactors(), STRONG])
def test_matrix_element_is_the_density_that_events_are_drawn_from(
    helicity, form_factors
):
    # two derivations: explicit spinors of the momenta, and spin amplitudes in the
    # helicity frame with the directions of the down-type fermions
    options = GenerationOptions(helicity=helicity, form_factors=form_factors)
    events = generate(300, options, seed=1)
    p = {n: components(events.truth[n]) for n in events.truth.fields[:10]}
    pair = p["top"] + p["antitop"]
    energy = mass(pair)
    moved = {name: to_rest_frame(q, pair) for name, q in p.items()}
    top = moved["top"][1:] / momentum(moved["top"])
    c = top[2]
    sine = np.sqrt(1 - c**2)
    theta_axis = np.stack([c * top[0] / sine, c * top[1] / sine, -sine])
    phi_axis = np.stack([-top[1] / sine, top[0] / sine, 0 * c])
    spinors = []
    for parent, name in (("top", "w_plus_down"), ("antitop", "w_minus_down")):
        q = to_rest_frame(moved[name], moved[parent])[1:]
        q = q / np.sqrt(np.sum(q**2, axis=0))
        n = [np.sum(q * axis, axis=0) for axis in (theta_axis, phi_axis, top)]
        norm = np.sqrt(2 * (1 + n[2]))
        spinors.append(np.stack([(1 + n[2]) / norm, (n[0] + 1j * n[1]) / norm]))
    x = vertex(energy, int(options.helicity), options.inputs, form_factors)
    couplings = spin_couplings(x, energy, mass(p["top"]), mass(p["antitop"]), 172.5)
    eta = np.full(len(events), float(options.helicity))
    uu, ud, du, dd = amplitude_matrix(couplings, eta, c)
    first, second = np.conj(spinors[0]), spinors[1]
    amplitude = first[0] * (uu * second[0] + ud * second[1])
    amplitude += first[1] * (du * second[0] + dd * second[1])
    sampled = np.abs(amplitude) ** 2
    # what the decays contribute: (p_b.p_up)(p_t.p_down) and the resonances cancel in
    # the ratio to other couplings
    other = FormFactors().resolved().shifted(f1v_z=0.2)
    x = vertex(energy, int(options.helicity), options.inputs, other)
    couplings = spin_couplings(x, energy, mass(p["top"]), mass(p["antitop"]), 172.5)
    uu, ud, du, dd = amplitude_matrix(couplings, eta, c)
    amplitude = first[0] * (uu * second[0] + ud * second[1])
    amplitude += first[1] * (du * second[0] + dd * second[1])
    ratio = coupling_weights(events, other, generated=form_factors)
    np.testing.assert_allclose(ratio, np.abs(amplitude) ** 2 / sampled, rtol=1e-7)


@pytest.mark.parametrize("helicity", ["LR", "RL"])
def test_weights_turn_a_sample_into_one_with_other_couplings(helicity):
    other = FormFactors().resolved().shifted(f1a_z=-0.1, f2v_z=0.05)
    events = generate(60_000, plain(helicity), seed=5)
    weights = coupling_weights(events, other)
    h = -1 if helicity == "LR" else 1
    error = 5 * np.std(weights) / np.sqrt(len(events))  # 5 sigma, fixed seed
    expected = float(cross_section(500, h, form_factors=other) / cross_section(500, h))
    assert np.mean(weights) == pytest.approx(expected, abs=error)
    sign = np.sign(cos_theta(components(events.truth.top)))
    observed = np.sum(weights * sign) / np.sum(weights)
    wanted = float(forward_backward_asymmetry(500, h, form_factors=other))
    assert observed == pytest.approx(wanted, abs=5 * np.sqrt(1.1 / len(events)))


def test_weights_carry_the_spins_over():
    # the weighted sample and one generated with the other couplings agree in the mean
    # energy of the hadronic W, which the helicity of the top decides
    other = FormFactors().resolved().shifted(f1a_z=0.5)
    events = generate(50_000, plain("LR"), seed=6)
    direct = generate(50_000, plain("LR", form_factors=other), seed=7)
    weights = coupling_weights(events, other)
    energy = ak.to_numpy(events.truth.w_plus_down.E)
    target = ak.to_numpy(direct.truth.w_plus_down.E)
    weighted = np.sum(weights * energy) / np.sum(weights)
    error = 5 * np.hypot(
        np.std(target), np.std(weights * (energy - weighted)) / np.mean(weights)
    )
    assert weighted == pytest.approx(np.mean(target), abs=error / 50_000**0.5)
    assert abs(np.mean(energy) - weighted) > error / 50_000**0.5


def test_nothing_changes_for_the_same_couplings():
    events = generate(50, GenerationOptions(helicity="MIXED"), seed=2)
    np.testing.assert_allclose(coupling_weights(events, FormFactors()), 1.0, rtol=1e-12)
    np.testing.assert_allclose(
        angle_weights(events, asymmetry_factor=1.0), 1.0, rtol=1e-12
    )


def test_angle_weights_scale_the_asymmetry_and_keep_the_rate():
    events = generate(60_000, plain("RL"), seed=9)
    weights = angle_weights(events, asymmetry_factor=0.5)
    sign = np.sign(cos_theta(components(events.truth.top)))
    n = len(events)
    assert np.mean(weights) == pytest.approx(1.0, abs=5 * np.std(weights) / n**0.5)
    expected = 0.5 * float(forward_backward_asymmetry(500, 1))
    assert np.mean(weights * sign) == pytest.approx(expected, abs=5 / n**0.5)


def test_truth_is_required():
    events = generate(5, seed=1)
    bare = events[[name for name in events.fields if name != "truth"]]
    with pytest.raises(MissingFieldError, match="field 'truth' is required"):
        matrix_element(bare)
