"""Events from the generator."""

from __future__ import annotations

import awkward as ak
import numpy as np
import pytest

from toprecon.events import (
    components,
    concatenate_events,
    samples_of,
    validate_events,
    with_samples,
)
from toprecon.generation import GenerationOptions, describe, generate
from toprecon.generation.generator import BLOCK_SIZE
from toprecon.kinematics import mass


@pytest.fixture(scope="module")
def events():
    return generate(3_000, seed=11)


def test_events_are_complete(events):
    validate_events(events)
    assert len(events) == 3_000
    assert len(np.unique(ak.to_numpy(events.id))) == 3_000
    assert np.all(ak.to_numpy(events.weight) == 1.0)
    assert np.all(ak.to_numpy(events.helicity) == -1)
    (sample,) = samples_of(events)
    assert sample.name == "ttbar_lepton+jets_500_LR"
    assert sample.is_signal_process
    # 1519 fb with radiation times the share of (e, mu)+jets, 29.3 %
    assert sample.cross_section_lr == pytest.approx(1519 * 0.2928, rel=0.003)
    assert sample.entries == sample.sum_of_weights == 3_000


@pytest.mark.parametrize("cut", [(1, 2_999), (1_000, 2_000), (4_095, 2)])
def test_chunks_do_not_change_the_events(cut):
    first, second = cut
    start = 100
    whole = generate(first + second, seed=4, start=start)
    parts = [
        generate(first, seed=4, start=start),
        generate(second, seed=4, start=start + first),
    ]
    joined = concatenate_events([with_samples(part, ()) for part in parts])
    assert ak.almost_equal(with_samples(whole, ()), joined, rtol=0, atol=0)


def test_blocks_join_without_a_seam():
    n = BLOCK_SIZE + 50
    whole = generate(n, seed=4)
    tail = generate(60, seed=4, start=n - 60)
    assert ak.almost_equal(
        with_samples(whole[-60:], ()), with_samples(tail, ()), rtol=0, atol=0
    )


def test_seeds_and_helicities_give_different_events(events):
    other = generate(100, seed=12)
    right = generate(100, GenerationOptions(helicity="RL"), seed=11)
    energy = ak.to_numpy(events.truth.top.pz[:100])
    for sample in (other, right):
        assert not np.any(ak.to_numpy(sample.truth.top.pz) == energy)
        assert not np.any(np.isin(ak.to_numpy(sample.id), ak.to_numpy(events.id)))


def test_response_does_not_change_the_truth():
    coarse = GenerationOptions(response={"jet_energy_constant": 0.2})
    a, b = generate(50, seed=1), generate(50, coarse, seed=1)
    assert ak.almost_equal(a.truth, b.truth, rtol=0, atol=0)
    assert not ak.almost_equal(a.jets.E, b.jets.E)


def test_stored_objects_and_missing_momentum_balance(events):
    total = components(events.missing)
    for i, name in enumerate(("E", "px", "py", "pz")):
        total[i] += ak.to_numpy(
            ak.sum(events.jets[name], axis=1) + ak.sum(events.leptons[name], axis=1)
        )
    np.testing.assert_allclose(total[0], 500.0, atol=1e-9)
    np.testing.assert_allclose(total[1:], 0.0, atol=1e-9)


def test_truth_and_losses_balance(events):
    truth = events.truth
    total = components(truth.top) + components(truth.antitop)
    electron = ak.to_numpy(truth.electron_loss)
    positron = ak.to_numpy(truth.positron_loss)
    np.testing.assert_allclose(total[0] + electron + positron, 500.0, atol=1e-3)
    np.testing.assert_allclose(total[3] + electron - positron, 0.0, atol=1e-3)
    np.testing.assert_allclose(ak.to_numpy(truth.sqrt_s_prime), mass(total))


def test_no_events_are_events():
    none = generate(0, seed=1)
    assert len(none) == 0
    assert samples_of(none)[0].entries == 0
    assert none.fields == generate(1, seed=1).fields


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"n": -1}, r"generate\.n: a whole number >= 0 is required; got -1"),
        ({"n": 2.5}, r"generate\.n: a whole number"),
        ({"n": 1, "seed": -3}, r"generate\.seed: a whole number"),
        ({"n": 1, "start": "a"}, r"generate\.start: a whole number"),
    ],
)
def test_wrong_requests_are_refused(arguments, message):
    with pytest.raises(ValueError, match=message):
        generate(**arguments)


def test_mixed_beams_have_the_mixed_cross_section():
    beams = {"electron_polarisation": -0.8, "positron_polarisation": 0.3}
    options = GenerationOptions(helicity="MIXED", **beams)
    events = generate(10, options, seed=1)
    (sample,) = samples_of(events)
    expected = 0.585 * sample.cross_section_lr + 0.035 * sample.cross_section_rl
    assert sample.cross_section == pytest.approx(expected)
    assert sample.electron_polarisation == -0.8
    assert np.all(ak.to_numpy(events.helicity) == 0)


def test_chunks_are_described_together():
    options = GenerationOptions()
    whole = describe(options, 10_000)
    (part,) = samples_of(generate(100, options))
    assert whole.generated == whole.entries == whole.normalisation == 10_000
    assert whole.cross_section_lr == part.cross_section_lr
    assert whole.name == part.name
