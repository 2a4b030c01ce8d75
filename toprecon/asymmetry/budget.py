"""The distortion budget: why the reconstructed A_FB is not the generated one.

A_FB of a fixed set of events is linear in their signs, so the difference of two
variants is a sum of sign changes over classes divided by the weight of the set. The
steps add up exactly and do not depend on their order.
"""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import NDArray

from toprecon.asymmetry.state import (
    BACKGROUND,
    CHOSEN,
    CLOSEST,
    N_CATEGORIES,
    N_CLASSES,
    N_COMPONENTS,
    OUTSIDE,
    RECO,
    REJECTED,
    TRUE,
    UNIT,
)
from toprecon.events import PairingClass
from toprecon.statistics import Estimate, Measured, ratio

FloatArray = NDArray[np.float64]

MATCHED = (PairingClass.CORRECT, PairingClass.B_SWAPPED, PairingClass.W_MIXED)
UNMATCHED = (
    PairingClass.UNMATCHED,
    PairingClass.LEAKING,
    PairingClass.NO_TRUTH,
    PairingClass.NOT_SIGNAL,
)

STEPS = {
    "acceptance": "selection and cuts prefer some angles (generated angle)",
    "resolution": "measured momenta with the jets of the generated quarks",
    "wrong_b": "the two b jets are exchanged",
    "wrong_w": "another jet in the place of a W jet",
    "unmatched": "a quark has no jet of its own; boosted: leaks out of the fat jet",
    "charge": "top and antitop are mistaken for each other",
    "outside": "signal process outside the truth phase space",
    "background": "other processes",
}
"""Steps in the order in which they are shown, with their meaning."""


@dataclasses.dataclass(frozen=True)
class BudgetStep:
    """One step of the budget.

    Parameters
    ----------
    name : str
        Key of :data:`STEPS`.
    meaning : str
        One line for people.
    shift : Measured
        Change of A_FB, with the error of the simulated sample.
    share : float
        Share of the selected events that the step is about (acceptance: share of the
        generated events that are lost).
    """

    name: str
    meaning: str
    shift: Measured
    share: float


@dataclasses.dataclass(frozen=True)
class DistortionBudget:
    """Steps from the generated to the reconstructed A_FB.

    Parameters
    ----------
    generated : Measured
        A_FB of all signal events, generated angle.
    steps : tuple of BudgetStep
        In the order of :data:`STEPS`.
    reconstructed : Measured
        A_FB of all selected events, reconstructed angle.
    total : Measured
        Reconstructed minus generated, with the paired error.
    covariance : array, shape (S, S)
        Of the shifts.
    """

    generated: Measured
    steps: tuple[BudgetStep, ...]
    reconstructed: Measured
    total: Measured
    covariance: FloatArray

    @property
    def closure(self) -> float:
        """Total minus the sum of the steps; rounding only."""
        return self.total.value - sum(step.shift.value for step in self.steps)

    def __getitem__(self, name: str) -> BudgetStep:
        return {step.name: step for step in self.steps}[name]

    def __str__(self) -> str:
        lines = [f"{'generated, all signal':<24}{self.generated!s:>22}"]
        lines += [
            f"  {step.name:<22}{step.shift!s:>22}  {step.meaning}"
            for step in self.steps
            if step.shift.value or step.share
        ]
        lines.append(f"{'reconstructed':<24}{self.reconstructed!s:>22}")
        lines.append(f"{'difference':<24}{self.total!s:>22}  paired error")
        return "\n".join(lines)


def coefficients(categories: tuple[int, ...], *components: int) -> FloatArray:
    """Return coefficients that add some components over some categories, flat."""
    out = np.zeros((N_CATEGORIES, N_COMPONENTS))
    for category in categories:
        for component in components:
            out[category, component] += 1.0
    return out.ravel()


def difference(categories: tuple[int, ...], later: int, earlier: int) -> FloatArray:
    """Return coefficients of a difference of two components, flat."""
    return coefficients(categories, later) - coefficients(categories, earlier)


SELECTED = tuple(range(N_CLASSES))
EVERYTHING = (*SELECTED, OUTSIDE, BACKGROUND)


def budget_of(first: FloatArray, of_sums: FloatArray) -> DistortionBudget:
    """Return the budget that follows from the sums.

    Parameters
    ----------
    first : array, shape (C, 7)
        sum(w u) per category.
    of_sums : array, shape (7 C, 7 C)
        Covariance of the flattened sums.

    Returns
    -------
    DistortionBudget
        NaN where there are no selected signal events.
    """
    x = first.ravel()
    weight = coefficients(SELECTED, UNIT)
    everything = coefficients(EVERYTHING, UNIT)
    all_signal = (*SELECTED, REJECTED)
    generated = ratio(coefficients(all_signal, TRUE), coefficients(all_signal, UNIT), x)
    selected = ratio(coefficients(SELECTED, TRUE), weight, x)
    signal_reco = ratio(coefficients(SELECTED, RECO), weight, x)
    total_reco = ratio(coefficients(EVERYTHING, RECO), everything, x)
    correct = (int(PairingClass.CORRECT),)
    changes = {
        "resolution": difference(correct, CHOSEN, TRUE)
        + difference((PairingClass.B_SWAPPED, PairingClass.W_MIXED), CLOSEST, TRUE),
        "wrong_b": difference((PairingClass.B_SWAPPED,), CHOSEN, CLOSEST),
        "wrong_w": difference((PairingClass.W_MIXED,), CHOSEN, CLOSEST),
        "unmatched": difference(UNMATCHED, CHOSEN, TRUE),
        "charge": difference(SELECTED, RECO, CHOSEN),
    }
    steps: dict[str, Estimate] = {"acceptance": selected - generated}
    steps.update({name: ratio(c, weight, x) for name, c in changes.items()})
    for name, category in (("outside", OUTSIDE), ("background", BACKGROUND)):
        share = ratio(coefficients((category,), UNIT), everything, x)
        summed = ratio(coefficients((category,), RECO), everything, x)
        steps[name] = summed - share * signal_reco
    ordered = [steps[name] for name in STEPS]
    shares = _shares(first)
    return DistortionBudget(
        generated=generated.measured(of_sums),
        steps=tuple(
            BudgetStep(name, meaning, steps[name].measured(of_sums), shares[name])
            for name, meaning in STEPS.items()
        ),
        reconstructed=total_reco.measured(of_sums),
        total=(total_reco - generated).measured(of_sums),
        covariance=np.array(
            [[a.covariance(b, of_sums) for b in ordered] for a in ordered]
        ),
    )


def _shares(first: FloatArray) -> dict[str, float]:
    """Share of the events that each step is about."""
    w = first[:, UNIT]
    signal, everything = w[list(SELECTED)].sum(), w[list(EVERYTHING)].sum()
    parts = {
        "acceptance": (w[REJECTED], signal + w[REJECTED]),
        "resolution": (w[list(MATCHED)].sum(), signal),
        "wrong_b": (w[PairingClass.B_SWAPPED], signal),
        "wrong_w": (w[PairingClass.W_MIXED], signal),
        "unmatched": (w[list(UNMATCHED)].sum(), signal),
        "charge": (signal, signal),
        "outside": (w[OUTSIDE], everything),
        "background": (w[BACKGROUND], everything),
    }
    return {
        name: float(part / whole) if whole else float("nan")
        for name, (part, whole) in parts.items()
    }
