"""Distortion of A_FB at half of all generated events: cut on half A, quoted on half B."""

from __future__ import annotations

import awkward as ak
import numpy as np
import pytest

from tests.pairing.test_showered_pairing import LEPTON_JETS, prepared
from toprecon.events import components
from toprecon.kinematics import cos_theta
from toprecon.pairing import PairingOptions, calibrate, pair, reliability
from toprecon.resampling import in_half_a

pytestmark = pytest.mark.slow

EFFICIENCY = 0.50  # of all generated events


@pytest.fixture(scope="module")
def samples(event_data):
    return {
        h: prepared(event_data, f"lepjets_500_{h}", LEPTON_JETS) for h in ("LR", "RL")
    }


@pytest.fixture(scope="module")
def calibration(samples):
    events = ak.concatenate([s[0] for s in samples.values()])
    right = [
        np.where((m.angle < 0.3)[:, None], m.assignment, -1)
        for _, m, *_ in samples.values()
    ]
    return calibrate(events, np.concatenate(right))


def angles(sample, options):
    """Generated and reconstructed sign of the angle, share, half A."""
    events = sample[0]
    tops = pair(events, options)
    top, antitop = (cos_theta(components(tops[name])) for name in ("top", "antitop"))
    reco = np.where(ak.to_numpy(tops.hadronic_side) > 0, top, -antitop)
    share = ak.to_numpy(tops.observables["pairing.direction_share"])
    true = cos_theta(components(events.truth.top))
    half_a = in_half_a(ak.to_numpy(events.id))
    return np.sign(true), np.sign(reco), share, half_a


def at_half_efficiency(sample, options):
    """Figures on half B, each with its denominator in the name."""
    true, reco, share, half_a = angles(sample, options)
    of_all = sample[3]  # preselected over all generated
    kept_of_preselected = EFFICIENCY / of_all
    cut = np.quantile(share[half_a], 1 - kept_of_preselected)
    kept = ~half_a & (share >= cut)
    t, r = true[kept], reco[kept]
    difference = r - t
    forward, backward = (r[t > 0] < 0).mean(), (r[t < 0] > 0).mean()
    return {
        "efficiency of all": of_all * kept.sum() / (~half_a).sum(),
        "relative distortion": difference.mean() / t.mean(),
        "paired error": difference.std() / np.sqrt(len(t)) / abs(t.mean()),
        "slope": 1 - forward - backward,
        "acceptance, relative to the preselected": (t.mean() - true[~half_a].mean())
        / true[~half_a].mean(),
    }


@pytest.mark.parametrize(("charges", "bar"), [(False, 0.026), (True, 0.02)])
def test_left_handed_electrons_keep_their_asymmetry(samples, calibration, charges, bar):
    options = PairingOptions().calibrated(calibration, charges=charges)
    found = at_half_efficiency(samples["LR"], options)
    print(found)
    assert found["efficiency of all"] == pytest.approx(EFFICIENCY, abs=0.02)
    assert abs(found["relative distortion"]) <= bar + found["paired error"]
    assert found["slope"] >= 0.95
    # the price of the cut, to be corrected with the efficiency in bins of the angle
    assert abs(found["acceptance, relative to the preselected"]) < 0.12


@pytest.mark.parametrize("charges", [False, True])
def test_right_handed_electrons_keep_the_slope(samples, calibration, charges):
    options = PairingOptions().calibrated(calibration, charges=charges)
    found = at_half_efficiency(samples["RL"], options)
    print(found)
    assert found["efficiency of all"] == pytest.approx(EFFICIENCY, abs=0.02)
    assert abs(found["relative distortion"]) <= 0.026 + found["paired error"]
    assert found["slope"] >= 0.95
    # larger: most hypotheses agree on the hemisphere of forward tops
    assert abs(found["acceptance, relative to the preselected"]) < 0.22


def test_the_share_of_the_hemisphere_is_reliable(samples, calibration):
    options = PairingOptions().calibrated(calibration, charges=True)
    parts = [angles(s, options) for s in samples.values()]
    true, reco, share, half_a = (np.concatenate(x) for x in zip(*parts, strict=True))
    edges = [0.5, 0.6, 0.7, 0.8, 0.9, 0.95, 1.0]
    curve = reliability(share[~half_a], (true == reco)[~half_a], edges=edges)
    print(curve)
    assert (np.diff(curve.fraction) > 0).all()
    assert np.abs(curve.fraction - curve.stated).max() < 0.12
