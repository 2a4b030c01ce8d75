"""Does the correction of a study work? Closure, linearity, model dependence."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.errors import StudyError
from toprecon.events import EventTable, has_truth
from toprecon.generation import angle_weights, coupling_weights
from toprecon.migration import (
    ClosureResult,
    LinearityResult,
    UnfoldingOptions,
    accumulate_halves,
    check_closure,
    check_linearity,
)
from toprecon.study.cutting import apply_cuts
from toprecon.study.plan import StudyPlan
from toprecon.study.reconstruction import reconstruct
from toprecon.study.sums import check_plan
from toprecon.study.weights import weighted_rows
from toprecon.treelevel import FormFactors

ASYMMETRY_FACTORS = (0.0, 0.5, 1.0, 1.5)
"""Factors on the odd part of the angular distribution, as far as it stays positive."""

VARIED_COUPLINGS = ("f1v_photon", "f1v_z", "f1a_z")
"""Form factors varied by a fifth, up and down."""


def closure_of(
    table: EventTable,
    plan: StudyPlan,
    unfolding: UnfoldingOptions | None = None,
    *,
    beams: str = "plan",
) -> ClosureResult:
    """Correct half B of a table with the response of half A.

    Parameters
    ----------
    table : EventTable
        Made with the reconstruct part of the plan.
    plan : StudyPlan
        Cuts, beams and bins.
    unfolding : UnfoldingOptions, optional
        Method; inversion if absent.
    beams : str
        ``"plan"``, ``"LR"`` or ``"RL"``.

    Returns
    -------
    ClosureResult
        Residuals with paired errors.
    """
    check_plan(table, plan)
    weight, _ = weighted_rows(table, plan.beams, beams)
    selected = apply_cuts(table, plan).selected
    halves = accumulate_halves(table, selected, weight, plan.migration)
    return check_closure(*halves, unfolding)


def angle_linearity(
    events: ak.Array,
    plan: StudyPlan,
    unfolding: UnfoldingOptions | None = None,
    *,
    factors: Sequence[float] | None = None,
    beams: str = "plan",
) -> LinearityResult:
    """Correct half B with other asymmetries and everything else unchanged.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events with truth.
    plan : StudyPlan
        The plan.
    unfolding : UnfoldingOptions, optional
        Method; inversion if absent.
    factors : sequence of float, optional
        On the odd part of d sigma / d cos(theta) in the pair frame;
        :data:`ASYMMETRY_FACTORS`, the largest lowered if need be, if absent.
    beams : str
        ``"plan"``, ``"LR"`` or ``"RL"``.

    Returns
    -------
    LinearityResult
        Slope 1 and offset 0 are expected without radiation. Photons from the beams mix
        angles of the pair frame in one bin of the laboratory, and a hadronic antitop
        is not back to back with the top: that alone makes the slope of the generated
        events at 500 GeV 1.04.

    Raises
    ------
    StudyError
        If a factor makes the distribution negative.
    """
    largest = _largest_factor(events)
    if factors is None:
        top = math.floor(20 * largest) / 20
        factors = sorted({min(factor, top) for factor in ASYMMETRY_FACTORS})
    ratios = {}
    for factor in factors:
        if not -largest <= factor <= largest:
            msg = (
                "linearity: the angular distribution must stay positive, but the "
                f"asymmetry factor {factor:g} makes it negative; choose one from "
                f"{-largest:.2f} to {largest:.2f}"
            )
            raise StudyError(msg)
        ratio = angle_weights(events, asymmetry_factor=factor)
        # below the threshold of two tops of nominal mass there is no formula
        ratio = np.where(has_truth(events) & np.isnan(ratio), 1.0, ratio)
        ratios[f"asymmetry x {factor:g}"] = ratio
    return _linearity(events, plan, ratios, unfolding, beams)


def coupling_dependence(
    events: ak.Array,
    plan: StudyPlan,
    unfolding: UnfoldingOptions | None = None,
    *,
    variations: Mapping[str, FormFactors] | None = None,
    beams: str = "plan",
) -> LinearityResult:
    """Correct half B with other top couplings: the model dependence.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events with truth, decays included.
    plan : StudyPlan
        The plan.
    unfolding : UnfoldingOptions, optional
        Method; inversion if absent.
    variations : mapping of FormFactors, optional
        By name; :data:`VARIED_COUPLINGS` up and down by 20 % if absent.
    beams : str
        ``"plan"``, ``"LR"`` or ``"RL"``.

    Returns
    -------
    LinearityResult
        Other couplings change the helicities of the tops and thereby how often they
        are reconstructed in the wrong hemisphere: ``difference(name, "simulated")`` is
        the model dependence, reported and not required to vanish.
    """
    if variations is None:
        standard_model = FormFactors.standard_model()
        variations = {
            f"{name} {sign}20 %": FormFactors().shifted(
                **{name: factor * getattr(standard_model, name)}
            )
            for name in VARIED_COUPLINGS
            for sign, factor in (("+", 0.2), ("-", -0.2))
        }
    ratios = {"simulated": np.ones(len(events))}
    for name, form_factors in variations.items():
        ratios[name] = coupling_weights(events, form_factors)
    return _linearity(events, plan, ratios, unfolding, beams)


def _largest_factor(events: ak.Array) -> float:
    """Largest factor on the odd part that leaves every event a positive weight."""
    # the weight is 1 + (factor - 1) o, with o the odd share at the event's angle
    odd = 1 - angle_weights(events, asymmetry_factor=0.0)
    odd = odd[np.isfinite(odd)]
    if not len(odd):
        msg = "linearity: events with truth are required; got none"
        raise StudyError(msg)
    return 1 + 1 / max(-float(odd.min()), 1e-9)


def _linearity(
    events: ak.Array,
    plan: StudyPlan,
    ratios: dict[str, NDArray[np.float64]],
    unfolding: UnfoldingOptions | None,
    beams: str,
) -> LinearityResult:
    """Reconstruct the events and correct half B for every truth."""
    table = reconstruct(events, plan)
    weight, _ = weighted_rows(table, plan.beams, beams)
    selected = apply_cuts(table, plan).selected
    return check_linearity(table, selected, weight, ratios, plan.migration, unfolding)
