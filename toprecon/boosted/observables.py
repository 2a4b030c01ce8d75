"""Numbers per event that the boosted branch offers to cuts, scans and figures.

Without a prefix they are those of the hadronic fat jet; in all-hadronic events of the
fat jet with the higher energy, and ``second_`` of the other one.
"""

from __future__ import annotations

from toprecon.events import Observable

_SUBSTRUCTURE: tuple[tuple[str, str, str, tuple[float, float], str], ...] = (
    ("mass", "GeV", "mass before grooming", (0, 400), "jet mass"),
    ("groomed_mass", "GeV", "mass after soft drop", (0, 400), "groomed jet mass"),
    ("z", "", "energy share of the softer branch after soft drop", (0, 0.5), "z"),
    ("theta", "rad", "opening angle of that splitting", (0, 2), "splitting angle"),
    ("tau_1", "", "1-subjettiness", (0, 0.5), "tau_1"),
    ("tau_2", "", "2-subjettiness", (0, 0.3), "tau_2"),
    ("tau_3", "", "3-subjettiness", (0, 0.2), "tau_3"),
    ("tau_4", "", "4-subjettiness", (0, 0.1), "tau_4"),
    ("tau_21", "", "ratio tau_2/tau_1", (0, 1), "tau_2/tau_1"),
    ("tau_32", "", "ratio tau_3/tau_2", (0, 1), "tau_3/tau_2"),
    ("tau_43", "", "ratio tau_4/tau_3", (0, 1), "tau_4/tau_3"),
    ("c2", "", "energy correlator ratio C_2", (0, 0.7), "C_2"),
    ("d2", "", "energy correlator ratio D_2", (0, 5), "D_2"),
    ("sqrt_d12", "GeV", "kT scale at which 2 subjets become 1", (0, 200), "√d_12"),
    ("sqrt_d23", "GeV", "kT scale at which 3 subjets become 2", (0, 100), "√d_23"),
    ("sqrt_d34", "GeV", "kT scale at which 4 subjets become 3", (0, 50), "√d_34"),
    ("w_mass", "GeV", "mass of the W candidate", (0, 200), "W candidate mass"),
    ("w_helicity", "", "cosine of the W helicity angle", (-1, 1), "cos(W helicity)"),
    ("energy_share", "", "energy over half the collision energy", (0, 1.2), "2E/√s"),
    ("n_particles", "", "particles after grooming", (0, 150), "particles"),
)

SUBSTRUCTURE: tuple[str, ...] = tuple(row[0] for row in _SUBSTRUCTURE)
"""Names of the numbers that every fat jet has."""


def _observables() -> tuple[Observable, ...]:
    first = [
        Observable(
            f"boosted.{name}", unit, f"{meaning} of the fat jet", interval, label
        )
        for name, unit, meaning, interval, label in _SUBSTRUCTURE
    ]
    event = [
        Observable(
            "boosted.n_tagged",
            "",
            "fat jets tagged as tops: 0 or 1, all-hadronic up to 2",
            (0, 3),
            "tagged fat jets",
        ),
        Observable(
            "boosted.score",
            "",
            "probability to be a top; all-hadronic: the smaller of the two",
            (0, 1),
            "tag score",
        ),
        Observable(
            "boosted.energy", "GeV", "energy of the fat jet", (0, 1600), "jet energy"
        ),
        Observable(
            "boosted.lepton_angle",
            "rad",
            "angle of the fat jet to the lepton; NaN in the all-hadronic channel",
            (0, 3.1416),
            "angle to the lepton",
        ),
        Observable(
            "boosted.sign_share",
            "",
            "probability of the charge sign; NaN in lepton+jets",
            (0.5, 1),
            "share of the charge sign",
        ),
    ]
    second = [
        Observable(
            f"boosted.second_{name}",
            unit,
            f"{meaning} of the second fat jet; NaN in lepton+jets",
            interval,
            f"{label} (second)",
        )
        for name, unit, meaning, interval, label in _SUBSTRUCTURE
    ]
    return (*first, *event, *second)


OBSERVABLES: tuple[Observable, ...] = _observables()
