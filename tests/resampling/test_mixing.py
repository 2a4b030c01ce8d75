from __future__ import annotations

import hashlib

import numpy as np

from toprecon.resampling import hash_text, mix64

GOLDEN_GAMMA = 0x9E3779B97F4A7C15
MASK = (1 << 64) - 1

# First outputs of the splitmix64 generator for the seed 1234567; the reference values
# are printed with the public-domain C code of S. Vigna (prng.di.unimi.it) in many
# test suites of other languages.
SPLITMIX64_1234567 = (
    6457827717110365317,
    3203168211198807973,
    9817491932198370423,
    4593380528125082431,
    16408922859458223821,
)
# The same for the seed 0, from the same code.
SPLITMIX64_0 = (0xE220A8397B1DCDAF, 0x6E789E6AA1B965F4, 0x06C45D188009454F)


def states(seed, n):
    """States of the generator: the seed plus multiples of the golden gamma."""
    return np.array([(seed + k * GOLDEN_GAMMA) & MASK for k in range(1, n + 1)], "u8")


def test_mixing_gives_the_published_outputs_of_splitmix64():
    assert mix64(states(1234567, 5)).tolist() == list(SPLITMIX64_1234567)
    assert mix64(states(0, 3)).tolist() == list(SPLITMIX64_0)


def test_mixing_agrees_with_exact_integer_arithmetic(rng):
    words = rng.integers(0, MASK, 200, dtype=np.uint64, endpoint=True)

    def exact(z):
        z = ((z ^ (z >> 30)) * 0xBF58476D1CE4E5B9) & MASK
        z = ((z ^ (z >> 27)) * 0x94D049BB133111EB) & MASK
        return z ^ (z >> 31)

    assert mix64(words).tolist() == [exact(int(w)) for w in words]


def test_mixing_keeps_zero_leaves_its_argument_alone_and_never_collides(rng):
    words = np.arange(100_000, dtype=np.uint64)
    before = words.copy()
    assert len(np.unique(mix64(words))) == len(words)
    assert np.array_equal(words, before)
    assert int(mix64(0)) == 0


def test_every_bit_of_neighbouring_words_is_set_in_half_of_them():
    h = mix64(np.arange(1, 200_001, dtype=np.uint64))
    for bit in range(64):
        share = np.mean((h >> np.uint64(bit)) & np.uint64(1))
        # binomial error 0.0011; 5 sigma for 64 bits fails once in 3e4
        assert abs(share - 0.5) < 5 * 0.5 / np.sqrt(len(h))


def test_hash_of_text_is_the_start_of_its_sha256():
    # SHA-256 of "abc", FIPS 180-4 example: ba7816bf 8f01cfea ...
    assert hash_text("abc") == int.from_bytes(
        bytes.fromhex("ba7816bf8f01cfea"), "little"
    )
    assert hash_text("é") == int.from_bytes(
        hashlib.sha256("é".encode()).digest()[:8], "little"
    )
