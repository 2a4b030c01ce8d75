"""Pairs as Les Houches events."""

from __future__ import annotations

import collections

import numpy as np
import pytest

from toprecon.generation import GenerationOptions
from toprecon.generation.feed import (
    FERMION_MASSES,
    OUTGOING,
    les_houches_events,
    with_masses,
)
from toprecon.generation.partons import draw_partons
from toprecon.kinematics import mass, to_rest_frame


@pytest.fixture(scope="module")
def sample():
    options = GenerationOptions(decays="all", lepton_flavours=("e", "mu", "tau"))
    partons = draw_partons(np.random.default_rng(3), 300, options)
    return partons, les_houches_events(partons, 260.0)


def test_outgoing_particles_balance_the_beams(sample):
    # E. Boos et al., hep-ph/0109068: columns 7 to 10 are px, py, pz, E
    for event in sample[1]:
        total = np.sum([row[6:10] for row in event if row[1] == OUTGOING], axis=0)
        np.testing.assert_allclose(total, [0, 0, 0, 520.0], atol=1e-9)


def test_colour_lines_begin_and_end(sample):
    for event in sample[1]:
        ends = collections.Counter()
        for row in event:
            if row[1] == OUTGOING:
                ends[row[4]] += 1
                ends[row[5]] -= 1
        del ends[0]
        assert not +ends
        assert not -ends
        for row in event[2:]:
            quark, anti = 0 < row[0] <= 6, -6 <= row[0] < 0
            assert (row[4] > 0) == quark
            assert (row[5] > 0) == anti


def test_mothers_are_the_parents(sample):
    parents = {5: 6, -5: -6, 24: 6, -24: -6}
    for event in sample[1]:
        for row in event[4:-2]:
            mother = event[row[2] - 1]
            expected = parents.get(row[0])
            if expected is None:
                assert abs(mother[0]) == 24
                charge_of_w = mother[0] // 24
                # up-type fermions and charged antileptons come from the W+
                up_type = abs(row[0]) % 2 == 0
                assert (row[0] > 0) == (up_type == (charge_of_w > 0))
            else:
                assert mother[0] == expected


def test_fermions_get_masses_and_keep_their_w(sample):
    partons = sample[0]
    moved = with_masses(partons)
    for w, up, down in (
        ("w_plus", "w_plus_up", "w_plus_down"),
        ("w_minus", "w_minus_up", "w_minus_down"),
    ):
        np.testing.assert_allclose(
            moved[up] + moved[down], partons.momenta[w], atol=1e-9
        )
        for name in (up, down):
            wanted = [FERMION_MASSES.get(abs(c), 0.0) for c in partons.pdg[name]]
            np.testing.assert_allclose(mass(moved[name]), wanted, atol=2e-4)
        before = to_rest_frame(partons.momenta[down], partons.momenta[w])[1:]
        after = to_rest_frame(moved[down], partons.momenta[w])[1:]
        cosine = np.sum(before * after, axis=0) / np.sqrt(
            np.sum(before**2, axis=0) * np.sum(after**2, axis=0)
        )
        np.testing.assert_allclose(cosine, 1.0, atol=1e-12)


def test_another_reader_understands_the_events(sample, tmp_path):
    # pylhe reads the text form of the accord, hep-ph/0609017
    from tests.require import require

    pylhe = require("pylhe")
    lines = ['<LesHouchesEvents version="1.0">', "<init>"]
    lines += ["11 -11 260 260 0 0 0 0 3 1", "1.0 0.0 1.0 1", "</init>"]
    for event in sample[1][:20]:
        lines += ["<event>", f"{len(event)} 1 1.0 520 0.0073 0.1"]
        lines += [" ".join(map(repr, row[:13])) for row in event]
        lines += ["</event>"]
    lines += ["</LesHouchesEvents>"]
    path = tmp_path / "events.lhe"
    path.write_text("\n".join(lines))
    read = list(pylhe.LHEFile.fromfile(str(path)).events)
    assert len(read) == 20
    tops = [[p for p in e.particles if int(p.id) == 6] for e in read]
    for i, (top,) in enumerate(tops):
        assert float(top.e) == pytest.approx(sample[0].momenta["top"][0, i])
