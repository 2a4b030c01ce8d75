"""Variations: how A_FB shifts if the detector, a mass or the beams are different."""

from __future__ import annotations

from collections.abc import Mapping

import awkward as ak

from toprecon.asymmetry import Comparison
from toprecon.errors import OptionError
from toprecon.events import EventTable
from toprecon.selection import VariationOptions, vary
from toprecon.study.comparing import compare_plans
from toprecon.study.plan import StudyPlan
from toprecon.study.reconstruction import reconstruct


def variation_shifts(
    events: ak.Array,
    plan: StudyPlan,
    variations: Mapping[str, VariationOptions | StudyPlan],
    *,
    beams: str = "plan",
) -> dict[str, Comparison]:
    """Compare varied studies with the nominal one, event by event.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events.
    plan : StudyPlan
        The nominal plan.
    variations : mapping
        By name: a change of the input (:class:`VariationOptions`), or another plan,
        such as one with another assumed top mass or other polarisations.
    beams : str
        ``"plan"``, ``"LR"`` or ``"RL"``.

    Returns
    -------
    dict of Comparison
        By name; differences are varied minus nominal, with paired errors.

    Raises
    ------
    OptionError
        If a variation is something else.

    Examples
    --------
    Energy scale and assumed mass in one table::

        shifts = variation_shifts(
            events,
            plan,
            {
                "jet energy +1 %": VariationOptions(jet_energy_scale=1.01),
                "top mass +1 GeV": plan.with_settings({"pairing.top_mass": 173.5}),
            },
        )
        print(shifts["jet energy +1 %"]["reconstructed"].difference)
    """
    nominal = reconstruct(events, plan)
    out = {}
    for name, variation in variations.items():
        other: EventTable
        if isinstance(variation, VariationOptions):
            other, varied = reconstruct(vary(events, variation), plan), plan
        elif isinstance(variation, StudyPlan):
            same = variation.reconstruct_hash == plan.reconstruct_hash
            other, varied = nominal, variation
            if not same:
                other = reconstruct(events, variation)
        else:
            msg = (
                f"variations: {name!r} must be VariationOptions or a StudyPlan; got "
                f"{type(variation).__name__}"
            )
            raise OptionError(msg)
        out[name] = compare_plans((nominal, other), plan, varied, beams=beams)
    return out
