"""From an assignment to Tops: momenta, charges and observables."""

from __future__ import annotations

import dataclasses

import awkward as ak
import numpy as np
from numpy.typing import ArrayLike, NDArray

from toprecon.events import Channel, Observable, Status, momenta, record_of
from toprecon.kinematics import minkowski
from toprecon.pairing import legs
from toprecon.pairing.engine import system_of
from toprecon.pairing.names import TermName
from toprecon.pairing.objects import Objects, read_objects
from toprecon.pairing.options import PairingOptions, ScoreKind

FloatArray = NDArray[np.float64]


def _term_observable(
    name: TermName, meaning: str, interval: tuple[float, float], label: str
) -> Observable:
    unit = "" if name.value.endswith("angle") else "GeV"
    return Observable(f"pairing.{name}", unit, meaning, interval, label)


OBSERVABLES: tuple[Observable, ...] = (
    Observable(
        "pairing.chi2",
        "",
        "chi-square of the best assignment; calibrated: -2 ln of its likelihood ratio",
        (0, 50),
        "pairing chi2",
    ),
    Observable(
        "pairing.gap",
        "",
        "chi-square of the next assignment minus that of the best",
        (0, 50),
        "chi2 gap",
    ),
    Observable(
        "pairing.share",
        "",
        "weight of the best assignment among all",
        (0, 1),
        "share of the best assignment",
    ),
    Observable(
        "pairing.n_assignments", "", "assignments compared", (0, 100), "assignments"
    ),
    Observable(
        "pairing.sign_share",
        "",
        "probability that the candidate called the top is one, from the charges",
        (0.5, 1),
        "share of the charge sign",
    ),
    Observable(
        "pairing.direction_share",
        "",
        "probability that the hemisphere of the top is right, over all assignments and "
        "'none is right'; lepton+jets with the likelihood ratio, else NaN",
        (0.5, 1),
        "share of the hemisphere",
    ),
    _term_observable(
        TermName.W_MASS,
        "mass of the hadronic W; all-hadronic: of the W of the top",
        (40, 140),
        "hadronic W mass",
    ),
    _term_observable(
        TermName.HADRONIC_TOP_MASS,
        "mass of the hadronic top; all-hadronic: of the top",
        (100, 260),
        "hadronic top mass",
    ),
    _term_observable(
        TermName.TOP_ENERGY,
        "energy of the hadronic top; all-hadronic: of the top",
        (150, 350),
        "hadronic top energy",
    ),
    _term_observable(
        TermName.B_MOMENTUM,
        "b momentum in the rest frame of the hadronic top; all-hadronic: of the top",
        (20, 120),
        "b momentum, hadronic side",
    ),
    _term_observable(
        TermName.B_W_ANGLE,
        "cosine of the angle of b and W, hadronic side; all-hadronic: of the top",
        (-1, 1),
        "cos(b, W), hadronic side",
    ),
    _term_observable(
        TermName.LEPTONIC_W_MASS,
        "mass of the leptonic W; all-hadronic: of the W of the antitop",
        (40, 140),
        "leptonic W mass",
    ),
    _term_observable(
        TermName.LEPTONIC_TOP_MASS,
        "mass of the leptonic top; all-hadronic: of the antitop",
        (100, 260),
        "leptonic top mass",
    ),
    _term_observable(
        TermName.LEPTONIC_TOP_ENERGY,
        "energy of the leptonic top; all-hadronic: of the antitop",
        (150, 350),
        "leptonic top energy",
    ),
    _term_observable(
        TermName.LEPTONIC_B_MOMENTUM,
        "b momentum in the rest frame of the leptonic top; all-hadronic: of the antitop",
        (20, 120),
        "b momentum, leptonic side",
    ),
    _term_observable(
        TermName.LEPTONIC_B_W_ANGLE,
        "cosine of the angle of b and W, leptonic side; all-hadronic: of the antitop",
        (-1, 1),
        "cos(b, W), leptonic side",
    ),
    Observable(
        "pairing.neutrino_energy",
        "GeV",
        "energy of the neutrino; NaN in the all-hadronic channel",
        (0, 250),
        "neutrino energy",
    ),
)


def observables_with(options: PairingOptions) -> tuple[Observable, ...]:
    """Return the observables as they are with some settings of the pairing.

    Parameters
    ----------
    options : PairingOptions
        With the ratio as score, ``pairing.chi2`` is no chi-square and may be negative.

    Returns
    -------
    tuple of Observable
        The same names as :data:`OBSERVABLES`.
    """
    if options.score is not ScoreKind.RATIO:
        return OBSERVABLES
    return tuple(
        dataclasses.replace(item, range=(-40, 20), label="pairing -2 ln(right/wrong)")
        if item.name == "pairing.chi2"
        else item
        for item in OBSERVABLES
    )


@dataclasses.dataclass(frozen=True)
class Choice:
    """What was decided for every event, in the order top, antitop.

    Parameters
    ----------
    assignment : array of int8, shape (E, 6)
        Jets b, q, q of the top, then of the antitop; all -1 without a decision.
    sign : array of int8, shape (E,)
        +1 if the first candidate of the hypothesis was called the top, -1 if the
        second, 0 without a decision.
    sign_share : array, shape (E,)
        Probability of that sign.
    chi2, gap, share, direction_share : array, shape (E,)
        Outcome of the pairing; NaN if none was made.
    n_assignments : array of int, shape (E,)
        Assignments compared.
    status : array of uint8, shape (E,)
        Values of :class:`~toprecon.events.Status`.
    """

    assignment: NDArray[np.int8]
    sign: NDArray[np.int8]
    sign_share: FloatArray
    chi2: FloatArray
    gap: FloatArray
    share: FloatArray
    direction_share: FloatArray
    n_assignments: NDArray[np.int16]
    status: NDArray[np.uint8]


def build(
    events: ak.Array,
    assignment: ArrayLike,
    options: PairingOptions | None = None,
    *,
    channel: Channel = Channel.LEPTON_JETS,
) -> ak.Array:
    """Return the pairs that follow from given assignments.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events.
    assignment : array of int, shape (E, 6)
        Jets b, q, q of the top, then of the antitop; the leptonic side has its b and
        -1, -1. All -1 where there is no assignment.
    options : PairingOptions, optional
        Says how the neutrino is found.
    channel : Channel
        Decay channel.

    Returns
    -------
    ak.Array, shape (E,)
        Tops. The order of the assignment is taken as the charge; no chi-square is
        calculated (NaN).
    """
    options = options or PairingOptions()
    objects = read_objects(events, options, channel)
    chosen = np.array(assignment, dtype=np.int8)
    missing = (chosen < 0).all(axis=1)
    status = np.where(
        missing & (objects.status == Status.OK), Status.NO_TRUTH, objects.status
    ).astype(np.uint8)
    nothing = np.full(len(events), np.nan)
    choice = Choice(
        assignment=chosen,
        sign=np.where(missing, 0, 1).astype(np.int8),
        sign_share=nothing,
        chi2=nothing,
        gap=nothing,
        share=nothing,
        direction_share=nothing,
        n_assignments=np.where(missing, 0, 1).astype(np.int16),
        status=status,
    )
    return tops_of(objects, choice, channel)


def tops_of(objects: Objects, choice: Choice, channel: Channel) -> ak.Array:
    """Return Tops for what was decided.

    Parameters
    ----------
    objects : Objects
        Arrays of the events.
    choice : Choice
        Assignment and outcome.
    channel : Channel
        Decay channel.

    Returns
    -------
    ak.Array, shape (E,)
        Tops; all momenta are NaN where the status is not OK.
    """
    good = choice.status == Status.OK
    assignment = np.where(good[:, None], choice.assignment, np.int8(-1))
    hadronic = assignment[:, [1, 4]] >= 0
    leptonic_w = objects.lepton + objects.neutrino
    sides = []
    for column, is_hadronic in zip((0, 3), hadronic.T, strict=True):
        b = _jet(objects, assignment[:, column])
        q1 = _jet(objects, assignment[:, column + 1])
        q2 = _jet(objects, assignment[:, column + 2])
        w = q1 + q2
        if channel is Channel.LEPTON_JETS:
            w = np.where(is_hadronic, w, np.where(good, leptonic_w, np.nan))
        sides.append((b, w))
    top_is_hadronic = hadronic[:, 0]
    side = hadronic[:, 0].astype(np.int8) - hadronic[:, 1].astype(np.int8)
    observables = {
        "pairing.chi2": choice.chi2,
        "pairing.gap": choice.gap,
        "pairing.share": choice.share,
        "pairing.n_assignments": choice.n_assignments.astype(np.float64),
        "pairing.sign_share": choice.sign_share,
        "pairing.direction_share": choice.direction_share,
        **_kinematic_observables(sides, top_is_hadronic, channel),
        "pairing.neutrino_energy": np.where(good, objects.neutrino[0], np.nan),
    }
    (b_top, w_plus), (b_antitop, w_minus) = sides
    return ak.Array(
        record_of(
            {
                "top": momenta(b_top + w_plus),
                "antitop": momenta(b_antitop + w_minus),
                "w_plus": momenta(w_plus),
                "w_minus": momenta(w_minus),
                "assignment": _rows(assignment),
                "hadronic_side": side,
                "sign": np.where(good, choice.sign, np.int8(0)),
                "sign_share": choice.sign_share,
                "neutrino": momenta(np.where(good, objects.neutrino, np.nan)),
                "chi2": choice.chi2,
                "gap": choice.gap,
                "share": choice.share,
                "n_assignments": choice.n_assignments,
                "status": choice.status,
                "observables": record_of(observables),
            }
        )
    )


def _rows(values: NDArray[np.int8]) -> ak.Array:
    """Array of shape (E, 6) with a fixed inner length."""
    return ak.Array(ak.contents.NumpyArray(np.ascontiguousarray(values)))


def _jet(objects: Objects, index: NDArray[np.int8]) -> FloatArray:
    """Momentum of one jet of every event, shape (4, E); NaN where the index is -1."""
    position = objects.offsets[:-1] + index
    found = index >= 0
    result = np.full((4, len(index)), np.nan)
    result[:, found] = objects.jets[:, position[found]]
    return result


def _kinematic_observables(
    sides: list[tuple[FloatArray, FloatArray]],
    top_is_hadronic: NDArray[np.bool_],
    channel: Channel,
) -> dict[str, FloatArray]:
    """Values of the terms for what was chosen."""
    (b1, w1), (b2, w2) = sides
    if channel is Channel.LEPTON_JETS:
        b1, b2 = np.where(top_is_hadronic, b1, b2), np.where(top_is_hadronic, b2, b1)
        w1, w2 = np.where(top_is_hadronic, w1, w2), np.where(top_is_hadronic, w2, w1)
    result = {}
    for b, w, side in ((b1, w1, legs.HADRONIC), (b2, w2, legs.LEPTONIC)):
        with np.errstate(invalid="ignore"):
            leg = legs.Leg(system_of(b), system_of(w), minkowski(b, w), side)
            result[f"pairing.{side.w_mass}"] = np.sqrt(leg.w.mass2)
            for name, value in leg.values(tuple(TermName)):
                result[f"pairing.{name}"] = value
    return result
