"""Pairing by a chi-square over all assignments."""

from __future__ import annotations

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.events import Channel, Status
from toprecon.pairing.candidates import Choice, build, tops_of
from toprecon.pairing.directions import direction_share, forward_probability
from toprecon.pairing.engine import Further, Group, evaluate
from toprecon.pairing.hypotheses import Hypotheses, hypotheses
from toprecon.pairing.names import HADRONIC_TERMS, LEPTONIC_TERMS, TermName
from toprecon.pairing.objects import Objects, read_objects
from toprecon.pairing.options import PairingOptions, ScoreKind
from toprecon.pairing.scoring import Judge
from toprecon.pairing.terms import terms_of

FloatArray = NDArray[np.float64]


def pair(
    events: ak.Array,
    options: PairingOptions | None = None,
    *,
    channel: Channel = Channel.LEPTON_JETS,
) -> ak.Array:
    """Choose the assignment of jets to tops with the least chi-square.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events, selected or not.
    options : PairingOptions, optional
        Terms, masses, use of the b scores, neutrino.
    channel : Channel
        Lepton+jets: 12 assignments of four jets. All-hadronic: 90 of six jets.

    Returns
    -------
    ak.Array, shape (E,)
        Tops. Events that cannot be paired have a status that says why, NaN momenta and
        an assignment of -1.

    Notes
    -----
    Lepton+jets: a positive lepton means that the leptonic side is the top.
    All-hadronic: the side whose b jet has the more negative charge is the top.
    """
    options = options or PairingOptions()
    objects = read_objects(events, options, channel)
    n = len(events)
    assignment = np.full((n, 6), -1, dtype=np.int8)
    chi2, gap, share, hemisphere = np.full((4, n), np.nan)
    n_assignments = np.zeros(n, dtype=np.int16)
    terms = terms_of(options, objects.sqrt_s)
    judge = Judge.of(events, options, channel)
    plain = options.score is ScoreKind.PLAIN
    votes = options.score is ScoreKind.RATIO and channel is Channel.LEPTON_JETS
    charge = judge.jet_charges(None)
    for all_rows, all_positions in objects.groups(max(options.cap, _fewest(channel))):
        for part, calibration in judge.split(all_rows, objects.sqrt_s):
            rows, positions = all_rows[part], all_positions[part]
            table = hypotheses(channel, positions.shape[1])
            group = judge.group(objects, rows, positions, calibration)
            scores = evaluate(
                group,
                table,
                {k: term.of_events(rows) for k, term in terms.items()} if plain else {},
                joint=judge.joint(calibration, objects.sqrt_s[rows]),
                further=_hemisphere(group, table, -objects.lepton_charge[rows])
                if votes
                else None,
            )
            decided = scores.best >= 0
            jets = table.assignments[scores.best]
            # a position in the considered jets becomes a position in the event
            index = positions - objects.offsets[rows][:, None]
            absent = jets < 0
            jets = np.take_along_axis(index, np.where(absent, 0, jets), axis=1)
            assignment[rows] = np.where(absent | ~decided[:, None], -1, jets)
            chi2[rows], share[rows] = scores.chi2, scores.share
            gap[rows] = scores.second - scores.chi2
            hemisphere[rows] = scores.extra
            n_assignments[rows] = scores.n_allowed
            if channel is Channel.ALL_HADRONIC and calibration is not None:
                charge[positions] = judge.jet_charges(calibration)[positions]
    status = objects.status.copy()
    status[(status == Status.OK) & (assignment[:, 0] < 0)] = Status.NON_FINITE
    if channel is Channel.LEPTON_JETS:
        sign, sign_share = -objects.lepton_charge, np.ones(n)
    else:
        sign, sign_share = charge_sign(charge, objects, assignment)
    good = status == Status.OK
    signs = np.where(good, sign, 0).astype(np.int8)
    swapped = assignment[:, [3, 4, 5, 0, 1, 2]]
    choice = Choice(
        assignment=np.where((signs < 0)[:, None], swapped, assignment),
        sign=signs,
        sign_share=np.where(good, sign_share, np.nan),
        chi2=chi2,
        gap=gap,
        share=share,
        direction_share=hemisphere,
        n_assignments=n_assignments,
        status=status,
    )
    return tops_of(objects, choice, channel)


def _hemisphere(group: Group, table: Hypotheses, sign: FloatArray) -> Further:
    """Return what tells the engine how likely the hemisphere is right."""

    def share(chi2: FloatArray, best: NDArray[np.int64], events: slice) -> FloatArray:
        forward = forward_probability(group, table, sign, events)
        return direction_share(forward, chi2, best)

    return share


def _fewest(channel: Channel) -> int:
    return 6 if channel is Channel.ALL_HADRONIC else 4


def charge_sign(
    charge: FloatArray, objects: Objects, assignment: NDArray[np.int8]
) -> tuple[FloatArray, FloatArray]:
    """Return +1 where the first side has the more negative b jet, and its probability.

    Parameters
    ----------
    charge : array, shape (J,)
        Log likelihood ratio of anti-b over b of all jets.
    objects : Objects
        Arrays of the events.
    assignment : array of int8, shape (E, 6)
        Chosen jets.

    Returns
    -------
    sign, sign_share : array, shape (E,)
        Equal charges count as +1 with probability one half.
    """
    b = objects.offsets[:-1, None] + assignment[:, [0, 3]]
    found = (assignment[:, [0, 3]] >= 0).all(axis=1)
    difference = np.zeros(len(assignment))
    difference[found] = charge[b[found, 1]] - charge[b[found, 0]]
    share = 1.0 / (1.0 + np.exp(-np.abs(difference)))
    return np.where(difference >= 0, 1.0, -1.0), share


def contributions(
    events: ak.Array,
    assignment: ak.Array | NDArray[np.int8],
    options: PairingOptions | None = None,
    *,
    channel: Channel = Channel.LEPTON_JETS,
) -> dict[str, FloatArray]:
    """Return what every term adds to the chi-square of an assignment.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events.
    assignment : array of int, shape (E, 6), or Tops
        Jets b, q, q of the top, then of the antitop; of Tops their assignment.
    options : PairingOptions, optional
        Terms that are on.
    channel : Channel
        Decay channel; all-hadronic terms are summed over both sides.

    Returns
    -------
    dict of array, shape (E,)
        Contribution by name of the term; NaN where there is no assignment. With a
        density, a term counts what it adds to those before it. ``b_scores`` and
        ``charges`` are there if they are used. The sum is the chi-square of an
        assignment that the b scores allow.
    """
    options = options or PairingOptions()
    if isinstance(assignment, ak.Array) and "assignment" in assignment.fields:
        assignment = assignment["assignment"]
    chosen = np.asarray(assignment)
    tops = build(events, chosen, options, channel=channel)
    sqrt_s = ak.to_numpy(events.sqrt_s).astype(np.float64)
    values = {
        name: ak.to_numpy(tops.observables[f"pairing.{name}"]) for name in TermName
    }
    result: dict[str, FloatArray] = {}
    if options.score is ScoreKind.PLAIN:
        everything = slice(0, len(events))
        for name, term in terms_of(options, sqrt_s).items():
            if channel is Channel.LEPTON_JETS:
                result[name.value] = term.chi2(values[name], everything)
            elif name in HADRONIC_TERMS:
                other = LEPTONIC_TERMS[HADRONIC_TERMS.index(name)]
                result[name.value] = term.chi2(values[name], everything) + term.chi2(
                    values[other], everything
                )
    good = np.flatnonzero(ak.to_numpy(tops.status) == Status.OK)
    judge = Judge.of(events, options, channel)
    counts = ak.to_numpy(ak.num(events.jets, axis=1))
    jets = (np.cumsum(counts) - counts)[:, None] + chosen
    for part, calibration in judge.split(good, sqrt_s):
        rows = good[part]
        parts = judge.single_jets(events, chosen[rows], jets[rows], rows, calibration)
        joint = judge.joint(calibration, sqrt_s[rows])
        if joint is not None:
            parts = {**joint.contributions(values, rows, channel), **parts}
        for key, value in parts.items():
            result.setdefault(key, np.full(len(events), np.nan))[rows] = value
    return result
