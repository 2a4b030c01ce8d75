"""The steps of the selection and the event numbers they look at."""

from __future__ import annotations

import dataclasses
from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.events import (
    Channel,
    CutFlow,
    Observable,
    require_fields,
)
from toprecon.kinematics import momentum
from toprecon.selection.options import SelectionOptions

OBSERVABLES: tuple[Observable, ...] = (
    Observable("selection.n_jets", "", "number of jets", (0, 12), "jets"),
    Observable(
        "selection.n_leptons",
        "",
        "leptons above the energy required",
        (0, 4),
        "leptons",
    ),
    Observable(
        "selection.lepton_energy",
        "GeV",
        "energy of the most energetic lepton",
        (0, 250),
        "lepton energy",
    ),
    Observable("selection.btag_high", "", "highest b score", (0, 1), "highest b score"),
    Observable(
        "selection.btag_low",
        "",
        "second highest b score",
        (0, 1),
        "second highest b score",
    ),
    Observable(
        "selection.visible_energy",
        "GeV",
        "energy of all jets, leptons and photons",
        (0, 600),
        "visible energy",
    ),
    Observable(
        "selection.missing_momentum",
        "GeV",
        "size of the momentum that balances jets, leptons and photons",
        (0, 250),
        "missing momentum",
    ),
)


@dataclasses.dataclass(frozen=True)
class Selection:
    """Which events pass.

    Parameters
    ----------
    stage : array of uint8, shape (E,)
        0 if all steps are passed, else 1 + index of the step that failed first.
    steps : tuple of str
        What each step requires, for people.
    observables : ak.Array, shape (E,)
        Records of the numbers looked at, named as in :data:`OBSERVABLES`.
    """

    stage: NDArray[np.uint8]
    steps: tuple[str, ...]
    observables: ak.Array

    @property
    def passed(self) -> NDArray[np.bool_]:
        """Events that pass all steps, shape (E,)."""
        return self.stage == 0

    def cut_flow(self, weight: Any) -> CutFlow:
        """Return the events left after every step, for weights of shape (E,)."""
        return CutFlow.from_stage(self.stage, weight, self.steps)


def select(
    events: ak.Array,
    options: SelectionOptions | None = None,
    *,
    channel: Channel = Channel.LEPTON_JETS,
) -> Selection:
    """Decide which events are reconstructed.

    No event is removed: the result says for every event which step it fails first.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events.
    options : SelectionOptions, optional
        The reference preselection of the channel if absent.
    channel : Channel
        Fills in the numbers of objects that the options leave open.

    Returns
    -------
    Selection
        Stage of every event, the steps, and the numbers they look at.

    Notes
    -----
    An object that does not exist fails the step that needs it: its score is NaN, and
    a comparison with NaN is false.
    """
    options = options or SelectionOptions()
    required = options.requirements(channel)
    require_fields(events.jets, ("btag",), where="events.jets")
    n_jets = ak.to_numpy(ak.num(events.jets, axis=1))
    energetic = options.min_lepton_energy <= events.leptons.E
    n_leptons = ak.to_numpy(ak.sum(energetic, axis=1))
    scores = _two_highest(events.jets.btag)
    steps: list[tuple[str, Any]] = [
        (_counted(required.n_leptons, "lepton"), n_leptons == required.n_leptons),
        (f"at least {required.min_jets} jets", n_jets >= required.min_jets),
    ]
    if required.max_jets is not None:
        most = (f"at most {required.max_jets} jets", n_jets <= required.max_jets)
        steps.append(most)
    limits = (("highest", options.btag_high), ("second", options.btag_low))
    for (word, limit), score in zip(limits, scores, strict=True):
        if limit > 0:  # 0 asks for nothing, not even for a jet
            steps.append((f"{word} b score > {limit:g}", score > limit))
    stage = np.zeros(len(events), dtype=np.uint8)
    for index, (_, passes) in reversed(list(enumerate(steps))):
        stage[~passes] = index + 1
    visible = _visible(events)
    values = {
        "selection.n_jets": n_jets,
        "selection.n_leptons": n_leptons,
        "selection.lepton_energy": _highest(events.leptons.E),
        "selection.btag_high": scores[0],
        "selection.btag_low": scores[1],
        "selection.visible_energy": visible[0],
        "selection.missing_momentum": momentum(visible),
    }
    return Selection(
        stage=stage,
        steps=tuple(name for name, _ in steps),
        observables=ak.Array({k: np.asarray(v, float) for k, v in values.items()}),
    )


def _counted(n: int, noun: str) -> str:
    """Return a number with its noun, such as ``1 lepton`` or ``no leptons``."""
    return f"{n or 'no'} {noun}{'' if n == 1 else 's'}"


def _highest(values: ak.Array) -> NDArray[np.float64]:
    """Largest value of every event, NaN without any."""
    return ak.to_numpy(ak.fill_none(ak.max(values, axis=1), np.nan)).astype(float)


def _two_highest(values: ak.Array) -> NDArray[np.float64]:
    """Two largest values of every event, shape (2, E), NaN where there is none."""
    descending = ak.sort(values, axis=1, ascending=False)
    padded = ak.fill_none(ak.pad_none(descending, 2, axis=1, clip=True), np.nan)
    return np.asarray(ak.to_numpy(padded), dtype=float).reshape(-1, 2).T


def _visible(events: ak.Array) -> NDArray[np.float64]:
    """Sum of jets, leptons and photons, shape (4, E)."""
    total = np.zeros((4, len(events)))
    for name in ("jets", "leptons", "photons"):
        if name in events.fields:
            sums = [ak.sum(events[name][c], axis=1) for c in ("E", "px", "py", "pz")]
            total += np.stack([ak.to_numpy(s) for s in sums])
    return total
