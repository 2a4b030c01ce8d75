"""One small study for all figures."""

from __future__ import annotations

import pytest

import toprecon
from toprecon.study import LiveStudy, StudyPlan


@pytest.fixture(scope="session")
def live():
    plan = StudyPlan().with_cut("pairing.chi2", high=40)
    study = LiveStudy(toprecon.generate(3000, seed=5), plan, synchronous=True)
    yield study
    study.close()


@pytest.fixture
def beams(live):
    return live.result.by_helicity["LR"]
