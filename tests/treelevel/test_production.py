"""Cross section and asymmetry at tree level."""

from __future__ import annotations

import numpy as np
import pytest

from toprecon.constants import HBARC2_FB
from toprecon.treelevel import (
    ElectroweakInputs,
    FormFactors,
    angular_terms,
    chiral_amplitudes,
    cross_section,
    differential_cross_section,
    forward_backward_asymmetry,
    mean_helicity,
    polarised_terms,
    velocity,
)

LR, RL = -1, 1

# J. Fleischer et al., "One-loop corrections to the process e+e- -> t tbar including
# hard bremsstrahlung", hep-ph/0203220, table of total cross sections: two programs.
# The inputs are from memory, and confirmed by reproducing every printed digit.
PUBLISHED_INPUTS = ElectroweakInputs(
    alpha=1 / 137.03599976,
    sin2_theta=1 - (80.4514958 / 91.1867) ** 2,
    z_mass=91.1867,
    z_width=0.0,
    top_mass=173.8,
)
PUBLISHED_CONVERSION = 0.38937966e12 / HBARC2_FB


@pytest.mark.parametrize(
    ("sqrt_s", "sigma", "asymmetry"),
    [
        (500, (0.5122744, 0.5122751), (0.4146039, 0.4146042)),
        (1000, (0.1559185, 0.1559187), (0.5641706, 0.5641710)),
    ],
)
def test_born_values_are_the_published_ones_to_all_digits(sqrt_s, sigma, asymmetry):
    terms = polarised_terms(sqrt_s, 0, 0, PUBLISHED_INPUTS)
    # the second program is the more precise one; the first is 1e-6 from it
    total = float(terms.total) * PUBLISHED_CONVERSION / 1000
    assert total == pytest.approx(sigma[1], abs=1.0e-7)
    assert total == pytest.approx(sigma[0], abs=8.0e-7)
    assert float(terms.asymmetry) == pytest.approx(asymmetry[1], abs=1.0e-7)
    assert float(terms.asymmetry) == pytest.approx(asymmetry[0], abs=5.0e-7)


def test_differential_cross_section_is_the_published_one():
    # hep-ph/0202109 and hep-ph/0203220, 500 GeV, values from memory
    published = [0.108839194, 0.142275069, 0.225470464, 0.354666470, 0.491143716]
    cosines = np.array([-0.9, -0.5, 0.0, 0.5, 0.9])
    values = polarised_terms(500, 0, 0, PUBLISHED_INPUTS).at(cosines)
    np.testing.assert_allclose(
        values * PUBLISHED_CONVERSION / 1000, published, atol=2e-9
    )


def test_unpolarised_cross_section_agrees_with_another_scheme():
    # ancillary file of arXiv:1807.02121: 5.7e2 fb, with m_W = 79.824 and G_F
    w_mass, z_mass = 79.82436, 91.1876
    s2 = 1 - (w_mass / z_mass) ** 2
    alpha = np.sqrt(2) * 1.1663788e-5 * w_mass**2 * s2 / np.pi
    inputs = ElectroweakInputs(alpha=alpha, sin2_theta=s2)
    assert float(polarised_terms(500, 0, 0, inputs).total) == pytest.approx(
        568.5, abs=0.5
    )


# Evaluated independently with the default inputs: energy, then cross section [fb] and
# asymmetry for (P-, P+) in the order of POLARISATIONS
POLARISATIONS = [
    (-1, 1),
    (1, -1),
    (0, 0),
    (-0.8, 0.3),
    (0.8, -0.3),
    (-0.8, 0),
    (0.8, 0),
]
TABLE = {
    380: "1695.6/.2111 736.7/.2733 608.1/.2300 1017.7/.2127 490.3/.2658 799.9/.2140 "
    "416.3/.2607",
    500: "1564.4/.3823 722.7/.4707 571.8/.4103 940.5/.3847 477.5/.4605 740.1/.3867 "
    "403.4/.4535",
    1000: "463.6/.5263 227.3/.6170 172.7/.5562 279.2/.5289 149.2/.6071 220.0/.5310 "
    "125.5/.6002",
    1400: "240.4/.5494 119.0/.6391 89.9/.5791 144.8/.5520 78.0/.6294 114.1/.5541 "
    "65.6/.6226",
    3000: "53.0/.5683 26.4/.6568 19.8/.5978 31.9/.5709 17.3/.6474 25.2/.5730 "
    "14.5/.6407",
}


@pytest.mark.parametrize("sqrt_s", TABLE)
def test_polarised_beams_give_the_tabulated_values(sqrt_s):
    for beams, cell in zip(POLARISATIONS, TABLE[sqrt_s].split(), strict=True):
        sigma, asymmetry = map(float, cell.split("/"))
        terms = polarised_terms(sqrt_s, *beams)
        assert float(terms.total) == pytest.approx(sigma, abs=0.051)
        assert float(terms.asymmetry) == pytest.approx(asymmetry, abs=5.1e-5)


def test_pure_beams_at_500_gev():
    # arXiv:1307.8102 from memory: 572, 1564, 724 fb; digits: independent evaluation
    assert float(cross_section(500, LR)) == pytest.approx(1564.42, abs=0.01)
    assert float(cross_section(500, RL)) == pytest.approx(722.72, abs=0.01)
    assert float(cross_section(500, LR)) == pytest.approx(1564, rel=3e-3)
    assert float(cross_section(500, RL)) == pytest.approx(724, rel=3e-3)
    assert float(forward_backward_asymmetry(500, LR)) == pytest.approx(
        0.38235, abs=1e-5
    )
    assert float(forward_backward_asymmetry(500, RL)) == pytest.approx(
        0.47066, abs=1e-5
    )
    assert float(mean_helicity(500, LR)) == pytest.approx(-0.510, abs=2e-3)
    assert float(mean_helicity(500, RL)) == pytest.approx(0.628, abs=2e-3)


@pytest.mark.parametrize(
    ("sqrt_s", "expected"), [(380, 0.394), (500, 0.368), (1000, 0.342), (3000, 0.334)]
)
def test_left_right_asymmetry(sqrt_s, expected):
    # evaluated independently
    left, right = cross_section(sqrt_s, LR), cross_section(sqrt_s, RL)
    assert float((left - right) / (left + right)) == pytest.approx(expected, abs=6e-4)


def test_asymmetry_of_left_handed_electrons_depends_on_the_scheme():
    # G_mu scheme, evaluated independently; the mixing angle is rounded to 5e-5, which
    # is 0.3 fb
    inputs = ElectroweakInputs(alpha=1 / 132.10, sin2_theta=0.2232)
    assert float(cross_section(500, LR, inputs)) == pytest.approx(1542.3, abs=0.3)
    assert float(forward_backward_asymmetry(500, LR, inputs)) == pytest.approx(
        0.3934, abs=1e-4
    )
    assert float(forward_backward_asymmetry(500, RL, inputs)) == pytest.approx(
        0.4708, abs=1e-4
    )


@pytest.mark.parametrize("helicity", [LR, RL])
@pytest.mark.parametrize("z_width", [0.0, 2.4952])
def test_form_factors_give_the_chiral_formula(helicity, z_width):
    inputs = ElectroweakInputs(z_width=z_width)
    energy = np.array([346.0, 380.0, 500.0, 1400.0, 3000.0])
    left, right = chiral_amplitudes(energy, helicity, inputs)
    vector, axial = (left + right) / 2, (right - left) / 2
    beta, gamma = velocity(energy, inputs.top_mass), energy / (2 * inputs.top_mass)
    unit = 3 * np.pi * inputs.alpha**2 * beta / energy**2 * HBARC2_FB
    bracket = 8 / 3 * (abs(vector) ** 2 + beta**2 * abs(axial) ** 2)
    bracket += 4 / 3 * abs(vector) ** 2 / gamma**2
    asymmetry = helicity * 4 * beta * np.real(vector * axial.conj()) / bracket
    sm = FormFactors.standard_model(inputs)
    np.testing.assert_allclose(
        cross_section(energy, helicity, inputs, sm), unit * bracket, rtol=1e-10
    )
    np.testing.assert_allclose(
        forward_backward_asymmetry(energy, helicity, inputs, sm), asymmetry, rtol=1e-10
    )


def test_tensor_terms_have_the_published_form():
    # D = (1 + 1/(2 g^2)) V^2 + (b A)^2 + 3 V T + (1 + g^2/2) T^2 and
    # A_FB ~ (3/2) b A (V + T) / D, arXiv:1307.8102
    inputs = ElectroweakInputs(z_width=0.0)
    factors = FormFactors(f2v_photon=0.03, f2v_z=-0.02).resolved(inputs)
    s2 = inputs.sin2_theta
    for helicity, electron in ((LR, s2 - 0.5), (RL, s2)):
        k = electron / np.sqrt(s2 * (1 - s2)) * 500**2 / (500**2 - inputs.z_mass**2)
        v = -factors.f1v_photon + k * factors.f1v_z
        a = -factors.f1a_photon + k * factors.f1a_z
        t = -factors.f2v_photon + k * factors.f2v_z
        beta, gamma = float(velocity(500, 172.5)), 500 / 345
        d = (1 + 0.5 / gamma**2) * v**2 + (beta * a) ** 2 + 3 * v * t
        d += (1 + gamma**2 / 2) * t**2
        unit = 4 * np.pi * inputs.alpha**2 / (3 * 500**2) * HBARC2_FB
        assert float(cross_section(500, helicity, inputs, factors)) == pytest.approx(
            2 * unit * 3 * beta * d, rel=1e-12
        )
        assert float(
            forward_backward_asymmetry(500, helicity, inputs, factors)
        ) == pytest.approx(helicity * 1.5 * beta * a * (v + t) / d, rel=1e-12)


@pytest.mark.parametrize(
    ("name", "shift", "expected"),
    [
        ("f1v_photon", 0.01, (1.496, -0.00256, 2.140, -0.00415)),
        ("f1v_z", 0.01, (0.334, -0.00058, -0.410, 0.00081)),
        ("f1a_z", 0.01, (0.177, 0.00314, 0.286, 0.00335)),
        ("f1a_photon", None, (-0.447, -0.00813, 0.857, 0.00987)),
        ("f2v_photon", None, (2.731, -0.00560, 3.914, -0.00931)),
        ("f2v_z", None, (1.792, -0.00370, -2.179, 0.00540)),
    ],
)
def test_sensitivity_to_the_couplings(name, shift, expected):
    # full response to the shift at 500 GeV, evaluated independently
    inputs = ElectroweakInputs()
    start = FormFactors.standard_model(inputs)
    step = 0.01 if shift is None else shift * getattr(start, name)
    moved = start.shifted(inputs, **{name: step})
    for helicity, relative, difference in ((LR, *expected[:2]), (RL, *expected[2:])):
        before = angular_terms(500, helicity, inputs)
        after = angular_terms(500, helicity, inputs, moved)
        change = 100 * (float(after.total / before.total) - 1)
        assert change == pytest.approx(relative, abs=6e-4)
        change = float(after.asymmetry - before.asymmetry)
        assert change == pytest.approx(difference, abs=6e-6)


def test_explicit_dirac_spinors_give_the_same_distribution():
    # independent: 4x4 matrices in the Dirac representation
    factors = FormFactors(
        f2v_photon=0.05, f2a_photon=0.2, f2v_z=0.1, f2a_z=-0.15, f1a_photon=0.05
    )
    inputs = ElectroweakInputs(z_width=0.0)
    for helicity in (LR, RL):
        for cosine in (-0.8, 0.1, 0.7):
            expected = _dirac(cosine, 500.0, helicity, inputs, factors)
            value = differential_cross_section(cosine, 500.0, helicity, inputs, factors)
            assert float(value) == pytest.approx(expected, rel=1e-10)


def _dirac(cosine, energy, helicity, inputs, factors):
    """d sigma / d cos [fb] from traces of explicit Dirac matrices."""
    eye, zero = np.eye(2), np.zeros((2, 2))
    pauli = [
        np.array(m, complex)
        for m in ([[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]])
    ]
    gamma = [np.block([[eye, zero], [zero, -eye]]).astype(complex)]
    gamma += [np.block([[zero, s], [-s, zero]]) for s in pauli]
    g5 = 1j * gamma[0] @ gamma[1] @ gamma[2] @ gamma[3]
    one, metric = np.eye(4), np.diag([1, -1, -1, -1])

    def slash(p):
        return sum(metric[m, m] * p[m] * gamma[m] for m in range(4))

    def sigma(m, n):
        return 0.5j * (gamma[m] @ gamma[n] - gamma[n] @ gamma[m])

    mass, s2 = inputs.top_mass, inputs.sin2_theta
    f = factors.resolved(inputs)
    electron = s2 - 0.5 if helicity == LR else s2
    k = electron / np.sqrt(s2 * (1 - s2)) * energy**2 / (energy**2 - inputs.z_mass**2)
    v, a, t, d = (
        -getattr(f, f"{x}_photon") + k * getattr(f, f"{x}_z")
        for x in ("f1v", "f1a", "f2v", "f2a")
    )
    beta = float(velocity(energy, mass))
    sine = np.sqrt(1 - cosine**2)
    top = energy / 2 * np.array([1, beta * sine, 0, beta * cosine])
    antitop = energy / 2 * np.array([1, -beta * sine, 0, -beta * cosine])
    minus, plus = energy / 2 * np.array([[1, 0, 0, 1], [1, 0, 0, -1]])
    q = top + antitop
    vertices = []
    for m in range(4):
        tensor = sum(sigma(m, n) * metric[n, n] * q[n] for n in range(4)) / (2 * mass)
        vertices.append(
            gamma[m] @ (v * one + a * g5) + tensor @ (1j * t * one + d * g5)
        )
    projector = (one + helicity * g5) / 2
    total = 0.0
    for m in range(4):
        for n in range(4):
            bar = gamma[0] @ vertices[n].conj().T @ gamma[0]
            tops = np.trace(
                (slash(top) + mass * one)
                @ vertices[m]
                @ (slash(antitop) - mass * one)
                @ bar
            )
            electrons = np.trace(
                slash(plus) @ gamma[m] @ projector @ slash(minus) @ gamma[n]
            )
            total += (metric[m, m] * metric[n, n] * tops * electrons).real
    # |M|^2 = e^4/s^2 N_c L.T;  d sigma/d cos = beta |M|^2 / (32 pi s), pure beams
    squared = (4 * np.pi * inputs.alpha) ** 2 / energy**4 * 3 * total
    return beta * squared / (32 * np.pi * energy**2) * HBARC2_FB


def test_cross_section_vanishes_below_the_threshold():
    assert float(cross_section(300.0, LR)) == 0.0
    assert np.isnan(forward_backward_asymmetry(300.0, LR))


def test_pure_beams_are_required_where_a_helicity_is_asked_for():
    with pytest.raises(ValueError, match="helicity: pure beams are required"):
        cross_section(500, 0)


def test_terms_integrate_to_the_total():
    terms = angular_terms(500.0, LR)
    nodes, weights = np.polynomial.legendre.leggauss(4)
    assert float(weights @ terms.at(nodes)) == pytest.approx(float(terms.total))
    forward = (weights * 0.5) @ terms.at(0.5 + 0.5 * nodes)
    assert float(2 * forward / terms.total - 1) == pytest.approx(float(terms.asymmetry))
