"""Tiny made-up event tables whose answer is known by construction."""

from __future__ import annotations

import numpy as np

from toprecon.events import Branch, EventTable, Helicity, PairingClass, Sample, Status


def draw_cosines(n, asymmetry, rng):
    """Draw from 3/8 (1 + c^2) + A c, whose forward-backward asymmetry is A."""
    out = np.empty(0)
    while len(out) < n:
        c = rng.uniform(-1, 1, 2 * n)
        density = 0.375 * (1 + c**2) + asymmetry * c
        out = np.append(out, c[rng.uniform(0, 0.75 + abs(asymmetry), 2 * n) < density])
    return out[:n]


def toy_table(
    n=1000,
    *,
    seed=1,
    asymmetry=0.38,
    loss=0.0,
    resolution=0.0,
    wrong_b=0.0,
    wrong_w=0.0,
    unmatched=0.0,
    flip_forward=0.5,
    flip_backward=0.3,
    charge=0.0,
    outside=0.0,
    background=0.0,
    other_asymmetry=-0.5,
    weights=None,
    helicity=Helicity.LR,
    first_id=1,
    name="toy",
):
    """Return a table in which only the causes asked for are at work.

    ``loss`` is the probability to lose a backward event; ``wrong_b``, ``wrong_w`` and
    ``unmatched`` are shares of events, which flip with ``flip_forward`` and
    ``flip_backward``; ``charge`` is the probability of a wrong charge; ``outside`` and
    ``background`` are shares of rows with ``other_asymmetry``. The observable ``toy.quality`` is larger for
    wrong pairings.
    """
    rng = np.random.default_rng(seed)
    true = draw_cosines(n, asymmetry, rng)
    kind = rng.choice(
        np.array(
            [
                PairingClass.CORRECT,
                PairingClass.B_SWAPPED,
                PairingClass.W_MIXED,
                PairingClass.UNMATCHED,
            ]
        ),
        n,
        p=[1 - wrong_b - wrong_w - unmatched, wrong_b, wrong_w, unmatched],
    )
    smeared = true + (resolution * rng.normal(size=n) if resolution else 0.0)
    closest = np.clip(smeared, -1, 1)
    is_wrong = kind != PairingClass.CORRECT
    probability = np.where(true >= 0, flip_forward, flip_backward)
    flipped = is_wrong & (rng.uniform(size=n) < probability)
    chosen = np.where(flipped, -closest, closest)
    sign = np.where(rng.uniform(size=n) < charge, -1.0, 1.0)
    reco = chosen * sign
    is_matched = kind != PairingClass.UNMATCHED
    lost = (true < 0) & (rng.uniform(size=n) < loss)
    place = rng.uniform(size=n)
    is_background = place < background
    is_outside = ~is_background & (place < background + outside)
    other = draw_cosines(n, other_asymmetry, rng)
    reco = np.where(is_background | is_outside, other, reco)
    kind = np.where(is_background | is_outside, PairingClass.NOT_SIGNAL, kind)
    w = np.ones(n) if weights is None else np.asarray(weights(rng, n), np.float64)
    samples = (
        Sample(name, "ttbar", helicity, 500.0, entries=int(n)),
        Sample(f"{name}-other", "ww", helicity, 500.0),
    )
    quality = rng.exponential(np.where(is_wrong, 8.0, 2.0), n)
    return EventTable(
        {
            "id": first_id + np.arange(n, dtype=np.uint64),
            "sample": is_background.astype(np.int16),
            "weight": w,
            "is_signal": ~is_background & ~is_outside,
            "stage": lost.astype(np.uint8),
            "status": np.full(n, Status.OK),
            "branch": np.full(n, Branch.RESOLVED),
            "pairing_class": kind,
            "cos_theta_true": np.where(is_background, np.nan, true),
            "cos_theta_closest": np.where(
                is_matched & ~is_background & ~is_outside, closest, np.nan
            ),
            "cos_theta_chosen": np.where(is_background, np.nan, chosen),
            "cos_theta_reco": reco,
            "toy.quality": quality.astype(np.float32),
            "toy.noise": rng.uniform(0, 1, n).astype(np.float32),
        },
        samples,
        ("toy selection",),
    )


def selected(table):
    """Rows that pass the selection and are reconstructed."""
    return (table["stage"] == 0) & np.isfinite(table["cos_theta_reco"])


def asymmetry_ratio(table, wanted, asymmetry=0.38):
    """Ratio of the angular densities of two asymmetries, see :func:`draw_cosines`."""
    c = np.nan_to_num(table["cos_theta_true"])
    even = 0.375 * (1 + c**2)
    return (even + wanted * c) / (even + asymmetry * c)
