from __future__ import annotations

import awkward as ak
import numpy as np
import pytest

from toprecon.errors import OptionError
from toprecon.events import samples_of, with_samples
from toprecon.generation import GenerationOptions, generate
from toprecon.selection import VariationOptions, vary


@pytest.fixture(scope="module")
def events():
    return generate(3000, GenerationOptions(helicity="LR"), seed=4)


def flat(array):
    return ak.to_numpy(ak.flatten(array, axis=None))


def total(events, name):
    visible = ak.sum(events.jets[name], axis=1) + ak.sum(events.leptons[name], axis=1)
    return ak.to_numpy(visible + events.missing[name])


def test_the_default_changes_nothing(events):
    assert ak.array_equal(vary(events, VariationOptions()), events)
    assert samples_of(vary(events, VariationOptions())) == samples_of(events)


def test_scales_multiply_four_momenta_and_leave_the_rest(events):
    varied = vary(
        events, VariationOptions(jet_energy_scale=1.02, lepton_energy_scale=0.99)
    )
    for name in ("E", "px", "py", "pz"):
        assert flat(varied.jets[name]) == pytest.approx(1.02 * flat(events.jets[name]))
        assert flat(varied.leptons[name]) == pytest.approx(
            0.99 * flat(events.leptons[name])
        )
        # what is seen and what is missing add up to what they were
        assert total(varied, name) == pytest.approx(total(events, name), abs=1e-9)
    assert flat(varied.jets.mass) == pytest.approx(
        1.02 * flat(events.jets.mass), abs=1e-5
    )
    for name in ("truth", "weight", "id", "sample", "helicity"):
        assert ak.array_equal(varied[name], events[name])
    assert ak.array_equal(varied.jets.btag, events.jets.btag)


def test_smearing_has_the_width_asked_for(events):
    varied = vary(events, VariationOptions(jet_energy_smearing=0.05))
    ratio = flat(varied.jets.E) / flat(events.jets.E) - 1
    n = len(ratio)
    # 5 sigma
    assert abs(ratio.mean()) < 5 * 0.05 / np.sqrt(n)
    assert ratio.std() == pytest.approx(0.05, rel=5 / np.sqrt(2 * n))
    neighbours = ratio.reshape(-1, 4)
    assert abs(np.corrcoef(neighbours.T)[0, 1]) < 5 / np.sqrt(len(neighbours))
    direction = flat(varied.jets.px) / flat(varied.jets.E)
    assert direction == pytest.approx(flat(events.jets.px) / flat(events.jets.E))
    other = vary(events, VariationOptions(jet_energy_smearing=0.05, seed=2))
    again = flat(other.jets.E) / flat(events.jets.E) - 1
    assert abs(np.corrcoef(ratio, again)[0, 1]) < 5 / np.sqrt(n)


def test_huge_smearing_never_turns_a_jet_round(events):
    varied = vary(events, VariationOptions(jet_energy_smearing=1.0))
    assert flat(varied.jets.E).min() > 0


def test_b_scores_are_lost_and_shifted(events):
    lost = flat(vary(events, VariationOptions(btag_loss=0.2)).jets.btag)
    before = flat(events.jets.btag)
    share = np.mean((lost == 0) & (before > 0))
    assert share == pytest.approx(0.2, abs=5 * 0.4 / np.sqrt(len(before)))
    kept = lost > 0
    assert np.array_equal(lost[kept], before[kept])
    shifted = flat(vary(events, VariationOptions(btag_shift=-0.3)).jets.btag)
    assert shifted == pytest.approx(np.clip(before - 0.3, 0, 1))


def test_a_variation_does_not_depend_on_chunking(events):
    options = VariationOptions(jet_energy_smearing=0.1, btag_loss=0.3)
    whole = vary(events, options)
    parts = ak.concatenate([vary(events[:700], options), vary(events[700:], options)])
    for name in ("jets", "leptons", "missing"):
        assert ak.array_equal(whole[name], parts[name])


def test_events_without_jets_or_missing_momentum_are_no_problem(events):
    bare = events[[f for f in events.fields if f != "missing"]]
    bare = ak.with_field(bare, events.jets[:, :0], "jets")
    bare = with_samples(bare, samples_of(events))
    varied = vary(bare, VariationOptions(jet_energy_smearing=0.1, btag_loss=0.5))
    assert ak.sum(ak.num(varied.jets)) == 0
    assert "missing" not in varied.fields
    assert len(vary(events[:0], VariationOptions(btag_loss=0.1))) == 0


def test_particles_follow_the_energy_scale(events):
    with_particles = ak.with_field(
        events, events.jets[["E", "px", "py", "pz"]], "particles"
    )
    varied = vary(with_particles, VariationOptions(jet_energy_scale=0.9))
    assert flat(varied.particles.E) == pytest.approx(0.9 * flat(events.jets.E))


def test_wrong_options_are_explained():
    with pytest.raises(OptionError, match="jet_energy_scale: must be > 0; got 0"):
        VariationOptions(jet_energy_scale=0)
    with pytest.raises(OptionError, match="did you mean 'btag_loss'"):
        VariationOptions(btag_los=0.1)
