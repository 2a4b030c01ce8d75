"""Generated pairs and their six fermions, in the laboratory."""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import NDArray

from toprecon.constants import W_TO_HADRONS, W_TO_ONE_LEPTON
from toprecon.events import TRUTH_MOMENTA
from toprecon.generation.collisions import Collisions, draw_collisions, vertex_for
from toprecon.generation.decays import decay_tops
from toprecon.generation.options import Decays, Flavour, GenerationOptions
from toprecon.generation.spin import (
    draw_decay_directions,
    draw_production_angle,
    spin_couplings,
)
from toprecon.kinematics import decay_momentum

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
LEPTON_CODES = {Flavour.ELECTRON: 11, Flavour.MUON: 13, Flavour.TAU: 15}
# up- and down-type quarks of the two families that a W can reach; off-diagonal
# elements of the quark mixing matrix are left out
QUARK_CODES = ((2, 1), (4, 3))


@dataclasses.dataclass(frozen=True)
class Partons:
    """Generated pairs.

    Parameters
    ----------
    momenta : dict of array, shape (4, E)
        By the names of the truth record [GeV].
    pdg : dict of array, shape (E,)
        Codes of the four fermions from the W bosons (Monte Carlo numbering scheme).
    lost : array, shape (2, E)
        Energy that the electron and the positron lack at the collision [GeV]:
        radiated along the beams, and the spread.
    eta : array, shape (E,)
        Sign of the electron's helicity.
    acceptance : float
        Share of the collisions tried that made a pair.
    """

    momenta: dict[str, FloatArray]
    pdg: dict[str, IntArray]
    lost: FloatArray
    eta: FloatArray
    acceptance: float

    def __len__(self) -> int:
        return len(self.eta)

    def take(self, rows: slice) -> Partons:
        """Return some of the pairs."""
        return Partons(
            {name: p[:, rows] for name, p in self.momenta.items()},
            {name: code[rows] for name, code in self.pdg.items()},
            self.lost[:, rows],
            self.eta[rows],
            self.acceptance,
        )


def draw_partons(
    rng: np.random.Generator, n: int, options: GenerationOptions
) -> Partons:
    """Generate n pairs with their decays.

    Parameters
    ----------
    rng : numpy.random.Generator
        Random numbers.
    n : int
        Number of pairs.
    options : GenerationOptions
        Beams, decays, couplings.

    Returns
    -------
    Partons
        Unweighted, production and both decays fully correlated.
    """
    hard = draw_collisions(rng, n, options)
    inputs = options.inputs
    energy = 2 * np.sqrt(hard.electron * hard.positron)
    x = vertex_for(energy, hard.eta, options)
    couplings = spin_couplings(
        x, energy, hard.top_mass, hard.antitop_mass, inputs.top_mass
    )
    cosine = draw_production_angle(rng, couplings, hard.eta)
    first, second = draw_decay_directions(rng, couplings, hard.eta, cosine)
    azimuth = 2 * np.pi * rng.random(n)
    decayed = (
        decay_tops(rng, hard.top_mass, hard.w_plus_mass, inputs.b_mass, first),
        decay_tops(rng, hard.antitop_mass, hard.w_minus_mass, inputs.b_mass, second),
    )
    codes = draw_codes(rng, n, options)
    momentum = decay_momentum(energy, hard.top_mass, hard.antitop_mass)
    into_lab = _Frame(hard, energy, cosine, azimuth)
    names = (
        ("b", "w_plus_up", "w_plus_down", "top", "w_plus"),
        ("bbar", "w_minus_up", "w_minus_down", "antitop", "w_minus"),
    )
    momenta: dict[str, FloatArray] = {}
    masses = (hard.top_mass, hard.antitop_mass)
    for side, (b, up, down, top, w) in enumerate(names):
        # the boost along z' from the rest frame of the top into the pair frame
        along = momentum if side == 0 else -momentum
        products = [
            into_lab(_boost_along_z(p, along, masses[side])) for p in decayed[side]
        ]
        momenta[b], momenta[up], momenta[down] = products
        momenta[w] = momenta[up] + momenta[down]
        momenta[top] = momenta[w] + momenta[b]
    nominal = options.sqrt_s / 2
    return Partons(
        momenta={name: momenta[name] for name in TRUTH_MOMENTA},
        pdg=codes,
        lost=np.stack([nominal - hard.electron, nominal - hard.positron]),
        eta=hard.eta,
        acceptance=hard.acceptance,
    )


def draw_codes(
    rng: np.random.Generator, n: int, options: GenerationOptions
) -> dict[str, IntArray]:
    """Draw the flavours of the fermions from both W bosons, as the decays ask."""
    u = rng.random((5, n))
    leptonic_share = W_TO_ONE_LEPTON * len(options.lepton_flavours)
    share = leptonic_share / (leptonic_share + W_TO_HADRONS)
    plus, minus = {
        Decays.LEPTON_JETS: (u[0] < 0.5, u[0] >= 0.5),
        Decays.ALL_HADRONIC: (np.zeros(n, bool), np.zeros(n, bool)),
        Decays.DILEPTON: (np.ones(n, bool), np.ones(n, bool)),
        Decays.ALL: (u[0] < share, u[1] < share),
    }[options.decays]
    w_plus = _codes_of_w(u[2], plus, options)
    w_minus = _codes_of_w(u[3], minus, options)
    return {
        "w_plus_up": w_plus[0],
        "w_plus_down": -w_plus[1],
        "w_minus_up": -w_minus[0],
        "w_minus_down": w_minus[1],
    }


def _codes_of_w(
    u: FloatArray, leptonic: NDArray[np.bool_], options: GenerationOptions
) -> tuple[IntArray, IntArray]:
    """Codes (without sign) of the up- and down-type fermion of a W."""
    quarks = np.array(QUARK_CODES)[(u * 2).astype(np.int64)]
    up, down = quarks[:, 0].copy(), quarks[:, 1].copy()
    if options.lepton_flavours:
        codes = np.array([LEPTON_CODES[f] for f in options.lepton_flavours])
        charged = codes[(u * len(codes)).astype(np.int64)]
        up = np.where(leptonic, charged + 1, up)
        down = np.where(leptonic, charged, down)
    return up, down


class _Frame:
    """From the axes x', y', z' of the pair frame into the laboratory."""

    def __init__(
        self,
        hard: Collisions,
        energy: FloatArray,
        cosine: FloatArray,
        azimuth: FloatArray,
    ) -> None:
        self.cosine, self.sine = cosine, np.sqrt(1 - cosine**2)
        self.c, self.s = np.cos(azimuth), np.sin(azimuth)
        # the pair moves along the beam; both are exact, also for tiny losses
        self.gamma = (hard.electron + hard.positron) / energy
        self.gamma_beta = (hard.electron - hard.positron) / energy

    def __call__(self, p: FloatArray) -> FloatArray:
        forward = self.cosine * p[1] + self.sine * p[3]
        pz = self.cosine * p[3] - self.sine * p[1]
        px = self.c * forward - self.s * p[2]
        py = self.s * forward + self.c * p[2]
        return np.stack(
            [
                self.gamma * p[0] + self.gamma_beta * pz,
                px,
                py,
                self.gamma * pz + self.gamma_beta * p[0],
            ]
        )


def _boost_along_z(p: FloatArray, along: FloatArray, mass: FloatArray) -> FloatArray:
    """Boost from the rest frame of a particle of given momentum along z."""
    gamma_beta = along / mass
    gamma = np.sqrt(1 + gamma_beta**2)
    return np.stack(
        [
            gamma * p[0] + gamma_beta * p[3],
            p[1],
            p[2],
            gamma * p[3] + gamma_beta * p[0],
        ]
    )
