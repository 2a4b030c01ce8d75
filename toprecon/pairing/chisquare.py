"""Pairing by a chi-square over all assignments."""

from __future__ import annotations

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.events import Channel, Status, require_fields
from toprecon.pairing.candidates import Choice, build, tops_of
from toprecon.pairing.engine import Group, evaluate
from toprecon.pairing.hypotheses import hypotheses
from toprecon.pairing.names import HADRONIC_TERMS, LEPTONIC_TERMS
from toprecon.pairing.objects import Objects, read_objects
from toprecon.pairing.options import PairingOptions, TagUse
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
    chi2, gap, share = np.full((3, n), np.nan)
    n_assignments = np.zeros(n, dtype=np.int16)
    terms = terms_of(options, objects.sqrt_s)
    for rows, positions in objects.groups(max(options.cap, _fewest(channel))):
        table = hypotheses(channel, positions.shape[1])
        group = group_of(objects, rows, positions, options)
        used = {name: term.of_events(rows) for name, term in terms.items()}
        scores = evaluate(group, table, used)
        decided = scores.best >= 0
        jets = table.assignments[scores.best]
        # a position in the considered jets becomes a position in the event
        index = positions - objects.offsets[rows][:, None]
        absent = jets < 0
        jets = np.take_along_axis(index, np.where(absent, 0, jets), axis=1)
        jets = np.where(absent | ~decided[:, None], -1, jets)
        assignment[rows] = jets
        chi2[rows], share[rows] = scores.chi2, scores.share
        gap[rows] = scores.second - scores.chi2
        n_assignments[rows] = scores.n_allowed
    status = objects.status.copy()
    status[(status == Status.OK) & (assignment[:, 0] < 0)] = Status.NON_FINITE
    if channel is Channel.LEPTON_JETS:
        sign, sign_share = -objects.lepton_charge, np.ones(n)
    else:
        sign, sign_share = charge_sign(events, objects, assignment)
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
        n_assignments=n_assignments,
        status=status,
    )
    return tops_of(objects, choice, channel)


def _fewest(channel: Channel) -> int:
    return 6 if channel is Channel.ALL_HADRONIC else 4


def group_of(
    objects: Objects,
    rows: NDArray[np.int64],
    positions: NDArray[np.int64],
    options: PairingOptions,
) -> Group:
    """Return the engine's arrays of some events."""
    jets = np.ascontiguousarray(objects.jets[:, positions.T])
    b_penalty = w_penalty = None
    if options.tags is TagUse.MASK:
        candidate = b_candidates(objects.btag[positions].T)
        b_penalty = np.where(candidate, 0.0, np.inf)
        w_penalty = np.where(candidate, np.inf, 0.0)
    return Group(
        jets=jets,
        lepton=objects.lepton[:, rows],
        neutrino=objects.neutrino[:, rows],
        b_penalty=b_penalty,
        w_penalty=w_penalty,
    )


def b_candidates(btag: FloatArray) -> NDArray[np.bool_]:
    """Return which jets have the two highest scores (first of equals), shape (n, E)."""
    order = np.argsort(-btag, axis=0, kind="stable")
    result = np.zeros(btag.shape, dtype=bool)
    np.put_along_axis(result, order[:2], values=True, axis=0)
    return result


def charge_sign(
    events: ak.Array, objects: Objects, assignment: NDArray[np.int8]
) -> tuple[FloatArray, FloatArray]:
    """Return +1 where the first side has the more negative b jet, and its probability.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events whose jets have ``vertex_charge`` and ``track_charge``.
    objects : Objects
        Their arrays.
    assignment : array of int8, shape (E, 6)
        Chosen jets.

    Returns
    -------
    sign, sign_share : array, shape (E,)
        Equal charges count as +1 with probability one half.
    """
    require_fields(events.jets, ("vertex_charge", "track_charge"), where="events.jets")
    flat = ak.flatten(events.jets, axis=1)
    charge = np.nan_to_num(ak.to_numpy(flat.vertex_charge)) + np.nan_to_num(
        ak.to_numpy(flat.track_charge)
    )
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
        Contribution by name of the term; NaN where there is no assignment. Their sum
        is the chi-square of an assignment that the b scores allow.
    """
    options = options or PairingOptions()
    if isinstance(assignment, ak.Array) and "assignment" in assignment.fields:
        assignment = assignment["assignment"]
    tops = build(events, np.asarray(assignment), options, channel=channel)
    result = {}
    everything = slice(0, len(events))
    for name, term in terms_of(options, ak.to_numpy(events.sqrt_s)).items():
        hadronic = name in HADRONIC_TERMS
        if channel is Channel.ALL_HADRONIC and not hadronic:
            continue
        values = ak.to_numpy(tops.observables[f"pairing.{name}"])
        chi2 = term.chi2(values, everything)
        if channel is Channel.ALL_HADRONIC:
            other = LEPTONIC_TERMS[HADRONIC_TERMS.index(name)]
            values = ak.to_numpy(tops.observables[f"pairing.{other}"])
            chi2 = chi2 + term.chi2(values, everything)
        result[name.value] = chi2
    return result
