from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from toprecon.io.generated import GeneratedParticles, find_pair, links


def particles(rows, extra_links=()):
    """One event: (code, parents, energy) by position."""
    pdg = np.array([row[0] for row in rows])
    energy = np.array([float(row[2]) for row in rows])
    pairs = [(parent, i) for i, row in enumerate(rows) for parent in row[1]]
    pairs += list(extra_links)
    parent, daughter = np.array(pairs, dtype=np.int64).reshape(-1, 2).T
    p = np.stack([energy, 0 * energy, 0 * energy, 0.5 * energy])
    return GeneratedParticles(pdg, p, np.array([len(rows)]), parent, daughter)


PAIR = [
    (6, (), 250), (-6, (), 251),
    (24, (0,), 100), (5, (0,), 150), (-24, (1,), 101), (-5, (1,), 150),
    (2, (2,), 60), (-1, (2,), 40), (-12, (4,), 55), (11, (4,), 46),
]  # fmt: skip


def energies(truth):
    return {name: float(p[0, 0]) for name, p in truth.p.items()}


def test_a_plain_decay_is_read_off():
    truth = find_pair(particles(PAIR))
    assert energies(truth) == {
        "top": 250, "antitop": 251, "w_plus": 100, "w_minus": 101, "b": 150,
        "bbar": 150, "w_plus_up": 60, "w_plus_down": 40, "w_minus_up": 55,
        "w_minus_down": 46,
    }  # fmt: skip
    codes = {name: int(c[0]) for name, c in truth.pdg.items()}
    assert codes == {
        "w_plus_up": 2, "w_plus_down": -1, "w_minus_up": -12, "w_minus_down": 11
    }  # fmt: skip
    # mass of the pair: sqrt((250 + 251)^2 (1 - 0.25))
    assert np.isclose(truth.sqrt_s_prime[0], 501 * np.sqrt(0.75))


def test_radiation_copies_are_followed_and_the_first_gives_the_momentum():
    rows = [
        (6, (), 250), (-6, (), 251),
        (6, (0,), 245), (21, (0,), 5), (6, (2,), 240), (21, (2,), 5),
        (24, (4,), 100), (5, (4,), 140), (24, (6,), 98), (22, (6,), 2),
        (-24, (1,), 101), (-5, (1,), 150), (-5, (11,), 140), (21, (11,), 10),
        (2, (8,), 60), (-1, (8,), 38), (-12, (10,), 55), (11, (10,), 46),
        (11, (17,), 40), (22, (17,), 6),
    ]  # fmt: skip
    found = energies(find_pair(particles(rows)))
    assert found["top"] == 250
    assert found["w_plus"] == 100
    assert found["w_plus_up"] == 60
    assert found["bbar"] == 150
    assert found["w_minus_down"] == 46


def test_without_a_boson_in_the_record_its_fermions_make_it():
    rows = [
        (6, (), 250), (-6, (), 251),
        (5, (0,), 150), (4, (0,), 60), (-3, (0,), 40),
        (-24, (1,), 101), (-5, (1,), 150), (-14, (5,), 55), (13, (5,), 46),
    ]  # fmt: skip
    found = energies(find_pair(particles(rows)))
    assert found["w_plus"] == 100
    assert found["w_plus_up"] == 60
    assert found["b"] == 150


def test_a_copy_of_the_top_without_links_does_not_hide_the_decaying_one():
    rows = [(6, (), 260), *[(c, tuple(i + 1 for i in p), e) for c, p, e in PAIR]]
    found = energies(find_pair(particles(rows)))
    assert found["top"] == 250
    assert found["w_plus"] == 100


def test_missing_links_leave_the_rest_absent():
    rows = [(code, (), energy) for code, _, energy in PAIR]
    truth = find_pair(particles(rows))
    found = energies(truth)
    assert (found["top"], found["antitop"]) == (250, 251)
    assert np.isnan(found["w_plus"])
    assert np.isnan(found["b"])
    assert truth.pdg["w_plus_up"][0] == 0


def test_pairs_of_bosons_without_tops_keep_their_bosons():
    rows = [(24, (), 250), (-24, (), 251), (2, (0,), 150), (-1, (0,), 100)]
    found = energies(find_pair(particles(rows)))
    assert found["w_plus"] == 250
    assert found["w_plus_up"] == 150
    assert np.isnan(found["top"])


def test_circles_end():
    rows = [(6, (1,), 250), (6, (0,), 240), *PAIR[1:2]]
    truth = find_pair(particles(rows, [(0, 0)]))
    assert np.isnan(truth.p["w_plus"][0, 0])


def test_no_events_and_no_particles_are_fine():
    none = np.zeros(0, dtype=np.int64)
    for n in (0, 3):
        empty = GeneratedParticles(
            none, np.zeros((4, 0)), np.zeros(n, np.int64), none, none
        )
        truth = find_pair(empty)
        assert truth.p["top"].shape == (4, n)
        assert np.all(np.isnan(truth.p["top"]))


def test_ranges_count_within_their_event():
    # two events; the second begins at entry 3 of the relation
    source, target = links(
        index=np.array([1, 0, 9, 0, -2, 1]),
        index_counts=np.array([3, 3]),
        begin=np.array([0, 1, 0, 2], dtype=np.uint32),
        end=np.array([1, 3, 2, 3], dtype=np.uint32),
        counts=np.array([2, 2]),
    )
    assert source.tolist() == [0, 1, 2, 3]
    assert target.tolist() == [1, 0, 2, 3]


@given(st.integers(0, 2**32 - 1))
def test_any_links_whatever_give_momenta_or_nothing(seed):
    rng = np.random.default_rng(seed)
    counts = rng.integers(0, 12, 4)
    n = int(counts.sum())
    pdg = rng.choice([6, -6, 24, -24, 5, -5, 2, -1, 11, -12, 22], n)
    offsets = np.cumsum(counts) - counts
    event = np.repeat(np.arange(4), counts)
    m = 3 * n
    a = rng.integers(0, max(n, 1), m) if n else np.zeros(0, np.int64)
    b = offsets[event[a]] + rng.integers(0, counts[event[a]]) if n else a
    p = rng.normal(size=(4, n))
    truth = find_pair(GeneratedParticles(pdg, p, counts, a, b))
    for k in range(4):
        mine = p[:, event == k]
        for name in ("top", "b", "w_plus_up"):
            value = truth.p[name][:, k]
            assert np.all(np.isnan(value)) or np.any(np.all(value == mine.T, axis=1))
