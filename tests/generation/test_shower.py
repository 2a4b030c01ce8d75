"""Parton shower and hadronisation."""

from __future__ import annotations

import sys
from types import SimpleNamespace

import numpy as np
import pytest

from tests.generation.showered import showered_sample
from tests.require import require
from toprecon.errors import InputError, MissingPackageError
from toprecon.generation import GenerationOptions, generate
from toprecon.generation import shower as shower_module
from toprecon.generation.detector import NEUTRINOS
from toprecon.generation.shower import shower_pairs

require("pythia8mc")


def sums(p4, event, n):
    return np.stack([np.bincount(event, weights=c, minlength=n) for c in p4])


@pytest.mark.parametrize("decays", ["lepton+jets", "all-hadronic"])
def test_final_particles_carry_the_momentum_of_the_pair(decays):
    options, partons, _, particles = showered_sample(decays)
    total = sums(particles.p4, particles.event, len(partons))
    pair = partons.momenta["top"] + partons.momenta["antitop"]
    beam = options.sqrt_s / 2 * (1 + 8 * options.energy_spread) + 0.01
    # the rest went along the beams, as photons
    lost = partons.lost + beam - options.sqrt_s / 2
    np.testing.assert_allclose(total[0], pair[0] + lost.sum(axis=0), atol=1e-3)
    np.testing.assert_allclose(total[1:3], 0.0, atol=1e-3)
    np.testing.assert_allclose(total[3], pair[3] + lost[0] - lost[1], atol=1e-3)


def test_every_pair_has_two_b_hadrons():
    _, partons, _, particles = showered_sample()
    beauty = (np.abs(particles.heavy_pdg) // 100 % 10 == 5) | (
        np.abs(particles.heavy_pdg) // 1000 == 5
    )
    number = np.bincount(particles.heavy_event[beauty], minlength=len(partons))
    assert np.all(number >= 2)


def test_charge_is_conserved():
    from toprecon.generation.detector import charge_sign, true_kind
    from toprecon.generation.particles import ParticleKind

    _, partons, _, particles = showered_sample()
    kind = true_kind(np.abs(particles.pdg))
    charged = (kind == ParticleKind.CHARGED_HADRON) | (kind >= ParticleKind.ELECTRON)
    charged &= ~np.isin(np.abs(particles.pdg), NEUTRINOS)
    charge = np.where(charged, charge_sign(particles.pdg), 0)
    total = np.bincount(particles.event, weights=charge, minlength=len(partons))
    np.testing.assert_array_equal(total, 0)


def test_an_event_does_not_depend_on_those_before_it():
    options, partons, ids, particles = showered_sample()
    part = slice(40, 45)
    again = shower_pairs(partons.take(part), ids[part], options)
    chosen = (particles.event >= 40) & (particles.event < 45)
    np.testing.assert_array_equal(again.p4, particles.p4[:, chosen])
    np.testing.assert_array_equal(again.pdg, particles.pdg[chosen])


def test_multiplicity_is_that_of_two_b_jets_and_a_hadronic_w():
    # charged particles per hadronic Z decay at LEP: 20.8 (Review of Particle Physics);
    # a W is close to it, and b jets of this energy add about as much for each
    _, _, _, particles = showered_sample("all-hadronic")
    from toprecon.generation.detector import true_kind
    from toprecon.generation.particles import ParticleKind

    kind = true_kind(np.abs(particles.pdg))
    charged = (kind == ParticleKind.CHARGED_HADRON) & ~np.isin(
        np.abs(particles.pdg), NEUTRINOS
    )
    mean = np.count_nonzero(charged) / len(particles.counts)
    assert 55 < mean < 85


def test_missing_package_is_named(monkeypatch):
    monkeypatch.setitem(sys.modules, "pythia8mc", None)
    monkeypatch.setattr(
        shower_module, "_pair_generator", shower_module._pair_generator.__wrapped__
    )
    options = GenerationOptions(simulation="shower")
    with pytest.raises(MissingPackageError, match=r"pip install -e '.\[shower\]'"):
        generate(1, options)


class Broken:
    """Stands for a generator that never succeeds."""

    def __init__(self):
        self.rndm = SimpleNamespace(init=lambda _seed: None)
        self.readString = lambda _line: False

    def next(self):
        return False

    def init(self):
        return False


def test_failures_of_the_shower_are_told():
    with pytest.raises(InputError, match="gave no event in 20 attempts"):
        shower_module._next_event(Broken(), 1)
    with pytest.raises(InputError, match="refuses to start"):
        shower_module._initialise(Broken())
    with pytest.raises(InputError, match="does not know the setting 'Beams:none = 1'"):
        shower_module._configure(Broken(), ["Beams:none = 1"])
