"""Small samples with truth in files, for every test of the study."""

from __future__ import annotations

import awkward as ak
import numpy as np
import pytest

from toprecon.events import samples_of, with_samples
from toprecon.generation import GenerationOptions, generate
from toprecon.io import write_events
from toprecon.study import StudyPlan


def weighted(events, seed):
    """Return the events with uneven weights, some negative."""
    weight = np.random.default_rng(seed).uniform(-0.2, 2.0, len(events))
    (sample,) = samples_of(events)
    events = ak.with_field(events, weight, "weight")
    total = float(np.sum(weight))
    return with_samples(events, (sample.replace(sum_of_weights=total),))


@pytest.fixture(scope="session")
def study_files(tmp_path_factory):
    """Two files, one per helicity, with uneven weights."""
    folder = tmp_path_factory.mktemp("events")
    files = []
    for seed, (helicity, n) in enumerate((("LR", 900), ("RL", 700))):
        options = GenerationOptions(name=f"pairs_{helicity}", helicity=helicity)
        events = weighted(generate(n, options, seed=seed), seed)
        files.append(str(write_events(events, folder / f"{helicity}.root")))
    return files


@pytest.fixture(scope="session")
def study_plan():
    """A plan with a luminosity, polarised beams and a cut."""
    plan = StudyPlan().with_cut("pairing.chi2", high=30)
    return plan.with_settings(
        {
            "beams.luminosity": 500.0,
            "beams.electron_polarisation": -0.8,
            "beams.positron_polarisation": 0.3,
        }
    )
