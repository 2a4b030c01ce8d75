"""Toy pairs for the constrained fit: isotropic, with known Gaussian resolutions."""

from __future__ import annotations

import numpy as np

from toprecon import kinematics
from toprecon.constants import TOP_MASS, TOP_WIDTH, W_MASS, W_WIDTH
from toprecon.events import Helicity, Sample, make_events, momenta
from toprecon.pairing.fit_model import Measured
from toprecon.pairing.fit_options import FitOptions, JetResolution, LeptonResolution
from toprecon.pairing.fit_photon import radiator_exponent

B_MASS = 4.8  # GeV
RESOLUTION = JetResolution(energy_stochastic=0.6, angle_constant=0.01)
LEPTON = LeptonResolution(energy_constant=0.01, energy_linear=0.0, angle=0.001)
EXACT = FitOptions(
    w_width=0.0,
    top_width=0.0,
    energy_width=0.0,
    isr=False,
    jet=RESOLUTION,
    b_jet=RESOLUTION,
    lepton=LEPTON,
)


def two_body(rng, parent, first, second):
    """Decay isotropically; momenta (4, N) of both products."""
    n = parent.shape[1]
    size = kinematics.decay_momentum(kinematics.mass(parent), first, second)
    cosine, phi = rng.uniform(-1, 1, n), rng.uniform(-np.pi, np.pi, n)
    sine = np.sqrt(1 - cosine**2)
    p = size * np.stack([sine * np.cos(phi), sine * np.sin(phi), cosine])
    return (
        kinematics.from_rest_frame(
            np.concatenate([np.sqrt(size**2 + m**2)[None], sign * p]), parent
        )
        for m, sign in ((first, 1.0), (second, -1.0))
    )


def resonance(rng, n, mass, width, reach=25.0):
    """Breit-Wigner masses, cut off at ``reach`` [GeV]."""
    limit = np.arctan(2 * reach / width)
    return mass + width / 2 * np.tan(rng.uniform(-limit, limit, n))


def partons(rng, n, sqrt_s=500.0, *, widths=False, isr=False):
    """Momenta (6, 4, N) of b q q, b l nu, and photon energies along +-z (N,)."""
    photon = np.zeros(n)
    if isr:
        photon = 0.5 * sqrt_s * rng.uniform(size=n) ** (1 / radiator_exponent(sqrt_s))
        largest = (sqrt_s**2 - (2 * TOP_MASS + 5) ** 2) / (2 * sqrt_s)
        photon = np.where(photon < largest, photon, 0.0)
    side = rng.choice([-1.0, 1.0], n)
    zero = np.zeros(n)
    total = np.stack([sqrt_s - photon, zero, zero, -side * photon])
    room = kinematics.mass(total) - 2.0

    def masses(mass, width):
        return resonance(rng, n, mass, width) if widths else np.full(n, mass)

    w_1, w_2 = masses(W_MASS, W_WIDTH), masses(W_MASS, W_WIDTH)
    t_1, t_2 = masses(TOP_MASS, TOP_WIDTH), masses(TOP_MASS, TOP_WIDTH)
    closed = t_1 + t_2 > room
    t_1[closed] = t_2[closed] = TOP_MASS
    top_1, top_2 = two_body(rng, total, t_1, t_2)
    boson_1, b_1 = two_body(rng, top_1, w_1, B_MASS)
    boson_2, b_2 = two_body(rng, top_2, w_2, B_MASS)
    up_1, down_1 = two_body(rng, boson_1, 0.0, 0.0)
    lepton, neutrino = two_body(rng, boson_2, 0.0, 0.0)
    return np.stack([b_1, up_1, down_1, b_2, lepton, neutrino]), side * photon


def parameters(p):
    """Energy, polar angle, azimuth (O, 3, N) of momenta (O, 4, N)."""
    return np.stack(
        [
            p[:, 0],
            np.arctan2(np.hypot(p[:, 1], p[:, 2]), p[:, 3]),
            np.arctan2(p[:, 2], p[:, 1]),
        ],
        axis=1,
    )


def measure(rng, p, sqrt_s=500.0, *, leptonic=True):
    """Smear momenta (6, 4, N) with resolutions at the truth: (truth, Measured)."""
    p = p[:5] if leptonic else p
    true = parameters(p)
    sigma = np.empty_like(true)
    for i, energy in enumerate(p[:, 0]):
        kind = LEPTON if leptonic and i == 4 else RESOLUTION
        sigma[i, 0], sigma[i, 1] = kind.energy_error(energy), kind.angle_error(energy)
    sigma[:, 2] = sigma[:, 1] / np.maximum(np.sin(true[:, 1]), 1e-3)
    velocity = kinematics.momentum(p.swapaxes(0, 1)) / p[:, 0]
    values = true + sigma * rng.normal(size=true.shape)
    return true, Measured(values, sigma, velocity, np.full(p.shape[2], sqrt_s))


def momenta_of(measured):
    """Measured momenta (O, 4, N)."""
    energy, theta, phi = measured.values.swapaxes(0, 1)
    size = energy * measured.velocity
    return np.stack(
        [
            energy,
            size * np.sin(theta) * np.cos(phi),
            size * np.sin(theta) * np.sin(phi),
            size * np.cos(theta),
        ],
        axis=1,
    )


def events_of(p, sqrt_s=500.0, *, leptonic=True):
    """Events of momenta (O, 4, N): jets are b q q b (q q), the lepton is the fifth."""
    n = p.shape[2]
    n_jets = 4 if leptonic else 6
    jets = p[:n_jets].transpose(1, 2, 0).reshape(4, -1)
    lepton = p[4] if leptonic else np.zeros((4, 0))
    counts = np.full(n, int(leptonic))
    fields = {
        "jets": momenta(jets, np.full(n, n_jets)),
        "leptons": momenta(lepton, counts, charge=np.full(lepton.shape[1], -1.0)),
        "weight": np.ones(n),
        "sample": np.zeros(n, np.int16),
        "helicity": np.full(n, -1, np.int8),
        "sqrt_s": np.full(n, sqrt_s),
        "id": np.arange(n, dtype=np.uint64),
    }
    return make_events(fields, [Sample("toys", helicity=Helicity.LR, sqrt_s=sqrt_s)])


def assignment_of(n, *, leptonic=True):
    """The right assignment of ``events_of``; the top is the first, hadronic side."""
    row = [0, 1, 2, 3, -1, -1] if leptonic else [0, 1, 2, 3, 4, 5]
    return np.tile(np.array(row, np.int8), (n, 1))
