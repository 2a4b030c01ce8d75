"""The engine compiled with numba: the same sums in the same order, hence the same bits.

Off unless the environment variable ``TOPRECON_COMPILED`` is 1, because compiling takes
some seconds and 200 MB; it pays for long runs of all-hadronic events.
"""

from __future__ import annotations

import functools
import math
import os
from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import MissingPackageError
from toprecon.pairing import legs
from toprecon.pairing.hypotheses import Hypotheses
from toprecon.pairing.names import HADRONIC_TERMS, LEPTONIC_TERMS, TermName
from toprecon.pairing.terms import Term

if TYPE_CHECKING:
    from toprecon.pairing.engine import Group

FloatArray = NDArray[np.float64]
Settings = tuple[NDArray[np.bool_], FloatArray, FloatArray, FloatArray]

VARIABLE = "TOPRECON_COMPILED"
LANES = 256  # events done together, so that the loops over them become vectors
TINY = legs.TINY


def is_wanted() -> bool:
    """Whether the environment asks for the compiled engine."""
    return os.environ.get(VARIABLE, "") == "1"


def compiled_table(
    group: Group, table: Hypotheses, terms: Mapping[TermName, Term], events: slice
) -> FloatArray:
    """Return the chi-square of every hypothesis, compiled.

    Parameters
    ----------
    group : Group
        E events with n jets.
    table : Hypotheses
        Those of n jets.
    terms : dict
        Terms that are on.
    events : slice
        Events wanted.

    Returns
    -------
    array, shape (P, events)
        Bit for bit that of :func:`~toprecon.pairing.engine.chi2_table`.

    Raises
    ------
    MissingPackageError
        If numba is not installed.
    """
    jets = np.ascontiguousarray(group.jets[:, :, events])
    n_jets, n = jets.shape[1:]
    none = np.zeros((n_jets, n))

    def penalty(values: FloatArray | None) -> FloatArray:
        return none if values is None else np.ascontiguousarray(values[:, events])

    b, w = penalty(group.b_penalty), penalty(group.w_penalty)
    leptonic = group.leptonic_b_penalty
    other = b if leptonic is None else penalty(leptonic)
    first = np.empty((len(table.hadronic_legs), n))
    kernel = _kernels()
    kernel["hadronic"](
        jets,
        table.w_pairs,
        table.hadronic_legs,
        *_settings(terms, HADRONIC_TERMS, events, n),
        b,
        w,
        first,
    )
    second = first
    if table.is_leptonic:
        second = np.empty((len(table.leptonic_legs), n))
        momentum = group.lepton[:, events] + group.neutrino[:, events]
        kernel["leptonic"](
            jets,
            np.ascontiguousarray(momentum),
            table.leptonic_legs,
            *_settings(terms, LEPTONIC_TERMS, events, n),
            other,
            second,
        )
    result = np.empty((len(table), n))
    kernel["combined"](first, second, table.rows, result)
    return result


def compiled_lowest(
    values: FloatArray,
) -> tuple[NDArray[np.int64], FloatArray, FloatArray]:
    """Return what :func:`~toprecon.pairing.engine.two_lowest` does, compiled."""
    n = values.shape[1]
    best, lowest, second = np.zeros(n, np.int64), np.full(n, np.inf), np.full(n, np.inf)
    _kernels()["lowest"](values, best, lowest, second)
    return best, lowest, second


def _settings(
    terms: Mapping[TermName, Term], names: tuple[TermName, ...], events: slice, n: int
) -> Settings:
    """Which terms are on, their targets (5, events) and resolutions, as arrays."""
    on = np.array([name in terms for name in names])
    target = np.zeros((len(names), n))
    below, above = np.zeros(len(names)), np.zeros(len(names))
    for row, name in enumerate(names):
        if name in terms:
            term = terms[name]
            target[row] = term.target[events]
            below[row], above[row] = term.below, term.above
    return on, target, below, above


@functools.cache
def _kernels() -> dict[str, Callable[..., None]]:
    """Compile the kernels, once per process."""
    try:
        import numba
    except ImportError as error:
        msg = (
            f"{VARIABLE}=1 requires numba, but it is not installed; install the extra "
            "'fast' or unset the variable"
        )
        raise MissingPackageError(msg) from error
    compile_ = numba.njit(nogil=True, error_model="numpy")
    product, squared = compile_(_product), compile_(_squared)
    parts = product, squared, compile_(_systems(product)), compile_(_leg(squared))
    return {
        "hadronic": compile_(_hadronic(*parts)),
        "leptonic": compile_(_leptonic(*parts)),
        "combined": compile_(_combined),
        "lowest": compile_(_lowest),
    }


def _combined(first: Any, second: Any, rows: Any, out: Any) -> None:
    """Add the two legs of every hypothesis."""
    for start in range(0, out.shape[1], LANES):
        stop = min(start + LANES, out.shape[1])
        for row in range(len(rows)):
            a, b = rows[row, 0], rows[row, 1]
            for e in range(start, stop):
                out[row, e] = first[a, e] + second[b, e]


def _lowest(values: Any, best: Any, lowest: Any, second: Any) -> None:
    """Find the least and the next value of every column."""
    for start in range(0, values.shape[1], LANES):
        stop = min(start + LANES, values.shape[1])
        for row in range(values.shape[0]):
            for e in range(start, stop):
                value, least = values[row, e], lowest[e]
                second[e] = min(second[e], max(value, least))
                best[e] = row if value < least else best[e]
                lowest[e] = min(least, value)


def _product(p: Any, i: Any, q: Any, j: Any, e: Any) -> Any:
    """Minkowski product of two momenta, added up as in the numpy engine."""
    return (
        p[0, i, e] * q[0, j, e]
        - p[1, i, e] * q[1, j, e]
        - p[2, i, e] * q[2, j, e]
        - p[3, i, e] * q[3, j, e]
    )


def _squared(value: Any, target: Any, below: Any, above: Any) -> Any:
    """Return the contribution of one term."""
    difference = value - target
    pull = difference * (below if difference < 0.0 else above)
    return pull * pull


def _leg(squared: Any) -> Callable[..., Any]:
    """Make the function that adds the terms of b and W to those there, lane by lane."""
    tiny = TINY  # one loop per term: simple enough to become vector instructions

    def leg_chi2(
        chi2: Any, mass: Any, b: Any, w: Any, bw: Any, on: Any, target: Any,
        below: Any, above: Any, start: Any, width: Any,
    ) -> None:  # fmt: skip
        if on[1] or on[3]:
            for k in range(width):
                mass[k] = math.sqrt(max(b[1, k] + w[1, k] + 2.0 * bw[k], 0.0))
        if on[1]:
            for k in range(width):
                chi2[k] += squared(mass[k], target[1, start + k], below[1], above[1])
        if on[3]:
            for k in range(width):
                rest = math.sqrt(max(bw[k] * bw[k] - b[1, k] * w[1, k], 0.0))
                rest /= max(mass[k], tiny)
                chi2[k] += squared(rest, target[3, start + k], below[3], above[3])
        if on[2]:
            for k in range(width):
                energy = b[0, k] + w[0, k]
                chi2[k] += squared(energy, target[2, start + k], below[2], above[2])
        if on[4]:
            for k in range(width):
                size = max(b[2, k] * w[2, k], tiny)
                cosine = (b[0, k] * w[0, k] - bw[k]) / size
                cosine = min(max(cosine, -1.0), 1.0)
                chi2[k] += squared(cosine, target[4, start + k], below[4], above[4])

    return leg_chi2


def _systems(product: Any) -> Callable[..., Any]:
    """Make the function that gives energy, mass squared and momentum of momenta."""

    def systems(p: Any, start: Any, width: Any, out: Any) -> None:
        for j in range(p.shape[1]):
            for k in range(width):
                e = start + k
                energy = p[0, j, e]
                mass2 = max(product(p, j, p, j, e), 0.0)
                out[j, 0, k] = energy
                out[j, 1, k] = mass2
                out[j, 2, k] = math.sqrt(max(energy * energy - mass2, 0.0))

    return systems


def _hadronic(
    product: Any, squared: Any, systems: Any, leg_chi2: Any
) -> Callable[..., None]:
    """Make the loop over hadronic legs."""

    def hadronic(
        jets: Any, pairs: Any, table: Any, on: Any, target: Any, below: Any,
        above: Any, b_penalty: Any, w_penalty: Any, out: Any,
    ) -> None:  # fmt: skip
        n_jets, n = jets.shape[1], jets.shape[2]
        jet = np.empty((n_jets, 3, LANES))
        pair = np.empty((len(pairs), 3, LANES))
        of_pair = np.empty((len(pairs), LANES))
        between = np.empty((n_jets, n_jets, LANES))
        mass, bw, chi2 = np.empty(LANES), np.empty(LANES), np.empty(LANES)
        for start in range(0, n, LANES):
            width = min(LANES, n - start)
            systems(jets, start, width, jet)
            for w in range(len(pairs)):
                i, j = pairs[w, 0], pairs[w, 1]
                for k in range(width):
                    ij = product(jets, i, jets, j, start + k)
                    between[i, j, k] = ij
                    between[j, i, k] = ij
                    energy = jet[i, 0, k] + jet[j, 0, k]
                    mass2 = max(jet[i, 1, k] + jet[j, 1, k] + 2 * ij, 0.0)
                    pair[w, 0, k] = energy
                    pair[w, 1, k] = mass2
                    pair[w, 2, k] = math.sqrt(max(energy * energy - mass2, 0.0))
                    of_pair[w, k] = 0.0
                if on[0]:
                    for k in range(width):
                        value = math.sqrt(pair[w, 1, k])
                        of_pair[w, k] += squared(
                            value, target[0, start + k], below[0], above[0]
                        )
                for k in range(width):
                    of_pair[w, k] += w_penalty[i, start + k]
                    of_pair[w, k] += w_penalty[j, start + k]
            for leg in range(len(table)):
                b, w = table[leg, 0], table[leg, 1]
                i, j = pairs[w, 0], pairs[w, 1]
                for k in range(width):
                    bw[k] = between[b, i, k] + between[b, j, k]
                    chi2[k] = of_pair[w, k]
                leg_chi2(
                    chi2, mass, jet[b], pair[w], bw, on, target, below, above, start,
                    width,
                )  # fmt: skip
                for k in range(width):
                    out[leg, start + k] = chi2[k] + b_penalty[b, start + k]

    return hadronic


def _leptonic(
    product: Any, squared: Any, systems: Any, leg_chi2: Any
) -> Callable[..., None]:
    """Make the loop over leptonic legs."""

    def leptonic(
        jets: Any, momentum: Any, table: Any, on: Any, target: Any, below: Any,
        above: Any, penalty: Any, out: Any,
    ) -> None:  # fmt: skip
        n_jets, n = jets.shape[1], jets.shape[2]
        whole = momentum.reshape(4, 1, -1)
        jet, other = np.empty((n_jets, 3, LANES)), np.empty((1, 3, LANES))
        mass, bw, chi2 = np.empty(LANES), np.empty(LANES), np.empty(LANES)
        of_w = np.empty(LANES)
        for start in range(0, n, LANES):
            width = min(LANES, n - start)
            systems(jets, start, width, jet)
            systems(whole, start, width, other)
            for k in range(width):
                of_w[k] = 0.0
            if on[0]:
                for k in range(width):
                    value = math.sqrt(other[0, 1, k])
                    of_w[k] += squared(value, target[0, start + k], below[0], above[0])
            for leg in range(len(table)):
                b = table[leg]
                for k in range(width):
                    bw[k] = product(jets, b, whole, 0, start + k)
                    chi2[k] = of_w[k]
                leg_chi2(
                    chi2, mass, jet[b], other[0], bw, on, target, below, above, start,
                    width,
                )  # fmt: skip
                for k in range(width):
                    out[leg, start + k] = chi2[k] + penalty[b, start + k]

    return leptonic
