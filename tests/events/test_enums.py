"""Numbers stored in files must never change their meaning."""

from __future__ import annotations

import pytest

from toprecon.events import Branch, Channel, Helicity, PairingClass, Status


@pytest.mark.parametrize(
    ("kind", "values"),
    [
        (Helicity, {"LR": -1, "MIXED": 0, "RL": 1}),
        (
            Status,
            {
                "OK": 0,
                "NO_TRUTH": 1,
                "TOO_FEW_OBJECTS": 2,
                "NO_NEUTRINO": 3,
                "NOT_CONVERGED": 4,
                "NON_FINITE": 5,
            },
        ),
        (Branch, {"NONE": 0, "RESOLVED": 1, "BOOSTED": 2}),
        (
            PairingClass,
            {
                "NO_TRUTH": 0,
                "NOT_SIGNAL": 1,
                "UNMATCHED": 2,
                "CORRECT": 3,
                "B_SWAPPED": 4,
                "W_MIXED": 5,
                "LEAKING": 6,
            },
        ),
        (Channel, {"LEPTON_JETS": "lepton+jets", "ALL_HADRONIC": "all-hadronic"}),
    ],
)
def test_stored_values(kind, values):
    assert {item.name: item.value for item in kind} == values
