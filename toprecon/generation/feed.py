"""Generated pairs as Les Houches events with colour flow.

A particle is a tuple in the order of the accord: code, status, two mothers, two
colours, px, py, pz, E, m, lifetime, spin, scale.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.generation.partons import Partons
from toprecon.kinematics import decay_momentum, from_rest_frame, mass, to_rest_frame

FloatArray = NDArray[np.float64]
LesHouchesRow = tuple[Any, ...]
INCOMING, OUTGOING, INTERMEDIATE = -1, 1, 2
UNKNOWN_SPIN, NO_SCALE = 9.0, -1.0
# GeV, Review of Particle Physics; light quarks and electrons are massless here
FERMION_MASSES = {4: 1.5, 13: 0.1056584, 15: 1.77686}
SIDES = (
    ("top", "w_plus", "b", ("w_plus_up", "w_plus_down")),
    ("antitop", "w_minus", "bbar", ("w_minus_up", "w_minus_down")),
)


def les_houches_events(
    partons: Partons, beam_energy: float
) -> list[list[LesHouchesRow]]:
    """Return the pairs as Les Houches events.

    Parameters
    ----------
    partons : Partons
        Generated pairs.
    beam_energy : float
        Energy of each beam [GeV], above that of any collision. What a beam lacks
        becomes a photon along it, which balances the event and is not seen.

    Returns
    -------
    list of list of tuple
        One list of particles per event.

    References
    ----------
    E. Boos et al., hep-ph/0109068: the accord.
    """
    p = {name: q.T.tolist() for name, q in with_masses(partons).items()}
    masses = {
        name: mass(partons.momenta[name]).tolist()
        for name in ("top", "antitop", "w_plus", "w_minus", "b", "bbar")
    }
    codes = {name: code.tolist() for name, code in partons.pdg.items()}
    total = partons.momenta["top"] + partons.momenta["antitop"]
    # exactly what is missing to two beams, from the momenta as written
    photons = np.stack(
        [
            beam_energy - (total[0] + total[3]) / 2,
            beam_energy - (total[0] - total[3]) / 2,
        ]
    ).T.tolist()
    events = []
    for i in range(len(partons)):
        rows = [
            _row(11, INCOMING, 0, 0, 0, 0, (beam_energy, 0.0, 0.0, beam_energy), 0.0),
            _row(-11, INCOMING, 0, 0, 0, 0, (beam_energy, 0.0, 0.0, -beam_energy), 0.0),
            _row(6, INTERMEDIATE, 1, 2, 501, 0, p["top"][i], masses["top"][i]),
            _row(-6, INTERMEDIATE, 1, 2, 0, 501, p["antitop"][i], masses["antitop"][i]),
        ]
        for side, (_, w, b, fermions) in enumerate(SIDES):
            sign = 1 - 2 * side
            mother, colours = 3 + side, (501, 0) if side == 0 else (0, 501)
            rows.append(
                _row(
                    24 * sign, INTERMEDIATE, mother, mother, 0, 0, p[w][i], masses[w][i]
                )
            )
            w_line = len(rows)
            rows.append(
                _row(
                    5 * sign, OUTGOING, mother, mother, *colours, p[b][i], masses[b][i]
                )
            )
            for name in fermions:
                code = codes[name][i]
                quark = abs(code) < 10
                line = 502 + side if quark else 0
                rows.append(
                    _row(
                        code,
                        OUTGOING,
                        w_line,
                        w_line,
                        line if code > 0 else 0,
                        line if code < 0 else 0,
                        p[name][i],
                        FERMION_MASSES.get(abs(code), 0.0),
                    )
                )
        for energy, sign in zip(photons[i], (1, -1), strict=True):
            momentum = (energy, 0.0, 0.0, sign * energy)
            rows.append(_row(22, OUTGOING, 1, 2, 0, 0, momentum, 0.0))
        events.append(rows)
    return events


def with_masses(partons: Partons) -> dict[str, FloatArray]:
    """Return the momenta with masses for c quarks, muons and taus.

    Parameters
    ----------
    partons : Partons
        Pairs with massless fermions from the W bosons.

    Returns
    -------
    dict of array, shape (4, E)
        The direction in the W frame and the momentum of the W are kept.
    """
    momenta = dict(partons.momenta)
    for _, w, _, (up, down) in SIDES:
        first, second = _masses_of(partons.pdg[up]), _masses_of(partons.pdg[down])
        # only these events are touched: the bits of the others must not depend on
        # their company
        rows = np.flatnonzero((first > 0) | (second > 0))
        parent = momenta[w][:, rows]
        in_w = to_rest_frame(momenta[down][:, rows], parent)
        direction = in_w[1:] / np.sqrt(np.sum(in_w[1:] ** 2, axis=0))
        size = decay_momentum(mass(parent), first[rows], second[rows])
        energy = np.hypot(size, second[rows])
        moved = np.concatenate([energy[None], size * direction])
        lighter = from_rest_frame(moved, parent)
        momenta[down], momenta[up] = momenta[down].copy(), momenta[up].copy()
        momenta[down][:, rows] = lighter
        momenta[up][:, rows] = parent - lighter
    return momenta


def _masses_of(codes: NDArray[np.int64]) -> FloatArray:
    result = np.zeros(len(codes))
    for code, value in FERMION_MASSES.items():
        result[np.abs(codes) == code] = value
    return result


def _row(
    code: int,
    status: int,
    first: int,
    second: int,
    colour: int,
    anticolour: int,
    p: Any,
    m: float,
) -> LesHouchesRow:
    energy, px, py, pz = p
    return (
        code,
        status,
        first,
        second,
        colour,
        anticolour,
        px,
        py,
        pz,
        energy,
        m,
        0.0,
        UNKNOWN_SPIN,
        NO_SCALE,
    )
