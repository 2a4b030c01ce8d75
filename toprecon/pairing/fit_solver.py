"""Least squares with Lagrange multipliers, on blocks of fits.

Every fit of a block takes the same steps at the same time; those that have converged
leave the block. With a photon the energy |p_z| has a kink at zero, over which the
iteration would swing to and fro: three problems are solved instead (photon along the
electron beam, along the positron beam, none) and the lowest valid chi-square wins; a
photon has to be worth its parameter.
"""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import NDArray

from toprecon.pairing.fit_model import Linear, Measured, Model, linearise
from toprecon.pairing.fit_photon import photon_pull, radiator_exponent

FloatArray = NDArray[np.float64]

_SHORTEST = 0.1  # of a step, when steps are adapted
_VANISHED = 1e-4  # of the beam energy: a photon below is left to the branch without


@dataclasses.dataclass
class Solution:
    """Where the fits of a block ended.

    Parameters
    ----------
    x : array, shape (O, 3, B)
        Fitted energy [GeV], polar angle, azimuth [rad].
    photon, side : array, shape (B,)
        Photon energy [GeV] and beam: +1 electron, -1 positron, 0 no photon.
    chi2 : array, shape (B,)
        Chi-square; NaN where not converged.
    converged : array of bool, shape (B,)
        Whether the constraints hold and the chi-square is stationary.
    n_iterations : array of int, shape (B,)
        Steps taken, summed over the branches of the photon.
    """

    x: FloatArray
    photon: FloatArray
    side: FloatArray
    chi2: FloatArray
    converged: NDArray[np.bool_]
    n_iterations: NDArray[np.int16]


def solve(model: Model, measured: Measured) -> Solution:
    """Fit a block.

    Parameters
    ----------
    model : Model
        Constraints.
    measured : Measured
        Measurements; non-finite ones end as not converged.

    Returns
    -------
    Solution
        One entry per fit.
    """
    with np.errstate(all="ignore"):
        best = _solve_branch(model, measured, 0.0)
        gain = model.options.isr_gain
        # no photon can improve enough on a chi-square below the gain it needs
        open_fits = np.flatnonzero(~best.converged | (best.chi2 > gain))
        if not model.photon or not len(open_fits):
            return best
        part = measured.take(open_fits)
        for side in (1.0, -1.0):
            other = _solve_branch(model, part, side)
            best.n_iterations[open_fits] += other.n_iterations
            needed = np.where(best.side[open_fits] == 0.0, gain, 0.0)
            better = other.converged & (
                ~best.converged[open_fits]
                | (other.chi2 + needed < best.chi2[open_fits])
            )
            for name in ("x", "photon", "side", "chi2", "converged"):
                mine, theirs = getattr(best, name), getattr(other, name)
                mine[..., open_fits[better]] = theirs[..., better]
    return best


def cholesky(matrix: FloatArray) -> FloatArray:
    """Return the lower Cholesky factors; NaN where not positive definite."""
    factor = matrix.copy()
    for j in range(len(factor)):
        factor[j, j] = np.sqrt(factor[j, j])
        factor[j + 1 :, j] /= factor[j, j]
        for i in range(j + 1, len(factor)):
            factor[i, j + 1 : i + 1] -= factor[i, j] * factor[j + 1 : i + 1, j]
    return factor


def solve_lower(factor: FloatArray, right: FloatArray) -> FloatArray:
    """Return L^-1 r for factors of shape (C, C, B) and right sides (C, ..., B)."""
    out = right.copy()
    for i in range(len(factor)):
        for j in range(i):
            out[i] -= factor[i, j] * out[j]
        out[i] /= factor[i, i]
    return out


def _solve_upper(factor: FloatArray, right: FloatArray) -> FloatArray:
    """L^-T r."""
    out = right.copy()
    n = len(factor)
    for i in range(n - 1, -1, -1):
        for j in range(i + 1, n):
            out[i] -= factor[j, i] * out[j]
        out[i] /= factor[i, i]
    return out


def constraint_covariance(slopes: FloatArray, softness: FloatArray) -> FloatArray:
    """Return the lower triangle of A V A^T + softness^2, shape (C, C, B); rest 0."""
    n = len(slopes)
    out = np.zeros((n, n, slopes.shape[2]))
    for i in range(n):
        np.einsum("pb,jpb->jb", slopes[i], slopes[: i + 1], out=out[i, : i + 1])
        out[i, i] += softness[i] ** 2
    return out


@dataclasses.dataclass
class _State:
    """Fits still open, and where they are."""

    index: NDArray[np.intp]
    measured: Measured
    x: FloatArray
    offset: FloatArray  # of soft constraints [GeV], shape (C, B)
    photon: FloatArray
    chi2: FloatArray
    move: FloatArray  # last proposed, in resolutions, shape (P, B)
    fraction: FloatArray  # of it that was taken

    def keep(self, which: NDArray[np.bool_]) -> _State:
        return _State(
            self.index[which],
            self.measured.take(which),
            self.x[..., which],
            self.offset[..., which],
            self.photon[which],
            self.chi2[which],
            self.move[..., which],
            self.fraction[which],
        )


def _solve_branch(model: Model, measured: Measured, side: float) -> Solution:
    """Iterate one branch of the photon."""
    options, softness = model.options, model.softness
    n_fits = measured.sqrt_s.shape[0]
    found = Solution(
        measured.values.copy(),
        np.zeros(n_fits),
        np.full(n_fits, side),
        np.full(n_fits, np.nan),
        np.zeros(n_fits, dtype=bool),
        np.zeros(n_fits, dtype=np.int16),
    )
    state = _State(
        np.arange(n_fits),
        measured,
        measured.values.copy(),
        np.zeros((model.n_constraints, n_fits)),
        np.zeros(n_fits),
        np.full(n_fits, np.inf),
        np.zeros((measured.values.shape[0] * 3, n_fits)),
        np.ones(n_fits),
    )
    if side != 0.0:
        state.photon = _first_photon(model, measured, side)
    for iteration in range(options.max_iterations + 1):
        beam = None if side == 0.0 else np.full(state.index.shape, side)
        point = linearise(
            model, state.measured, state.x, None if beam is None else state.photon, beam
        )
        pulls, photon_sigma = _pulls(state, beam is not None)
        if photon_sigma is not None:
            point.slopes[:, -1] *= photon_sigma
        open_fits = _record(model, found, state, point, pulls, iteration, side)
        if iteration == options.max_iterations or not open_fits.any():
            break
        adapt = iteration >= options.full_steps
        _step(state, point, pulls, photon_sigma, softness, adapt=adapt)
        # packing costs about a third of an iteration
        if np.count_nonzero(open_fits) < 0.8 * len(open_fits):
            state = state.keep(open_fits)
    return found


def _first_photon(model: Model, measured: Measured, side: float) -> FloatArray:
    """Photon energy with which the measured momenta balance, within sensible limits."""
    x, velocity = measured.values, measured.velocity
    size = x[:, 0] * velocity
    z = -np.sum(size * np.cos(x[:, 1]), axis=0)
    if model.has_neutrino:
        # massless neutrino: (R - k)^2 = |q - k n|^2 for the missing energy R and q
        sin_theta = np.sin(x[:, 1])
        q_x = -np.sum(size * sin_theta * np.cos(x[:, 2]), axis=0)
        q_y = -np.sum(size * sin_theta * np.sin(x[:, 2]), axis=0)
        left = measured.sqrt_s - np.sum(x[:, 0], axis=0)
        energy = (left**2 - q_x**2 - q_y**2 - z**2) / (2.0 * (left - side * z))
    else:
        energy = side * z
    low, high = 0.01 * measured.sqrt_s, 0.4 * measured.sqrt_s
    return np.where(np.isfinite(energy), np.clip(energy, low, high), low)


def _pulls(state: _State, has_photon: bool) -> tuple[FloatArray, FloatArray | None]:
    """(measured - x)/sigma of all parameters, shape (P, B); resolution of the photon."""
    measured = state.measured
    pulls = (measured.values - state.x) / measured.sigma
    flat = pulls.reshape(-1, pulls.shape[2])
    if not has_photon:
        return flat, None
    # the prior eta^2, linearised about the present energy, acts like a measurement
    # with the resolution dk/d eta and the pull -eta
    eta, slope = photon_pull(
        state.photon, 0.5 * measured.sqrt_s, radiator_exponent(measured.sqrt_s)
    )
    return np.concatenate([flat, -eta[None]]), 1.0 / slope


def _record(
    model: Model,
    found: Solution,
    state: _State,
    point: Linear,
    pulls: FloatArray,
    iteration: int,
    side: float,
) -> NDArray[np.bool_]:
    """Write down fits that have converged; return which are still open."""
    options, softness = model.options, model.softness
    chi2 = np.einsum("pb,pb->b", pulls, pulls)
    for c in np.flatnonzero(softness > 0):
        chi2 += (state.offset[c] / softness[c]) ** 2
    size = np.abs(point.violation - state.offset).max(axis=0)
    finite = np.isfinite(size) & np.isfinite(chi2)
    if side != 0.0:
        finite &= state.photon > _VANISHED * 0.5 * state.measured.sqrt_s
    done = (
        finite
        & (size < options.tolerance)
        # a shortened step changes the chi-square less
        & (np.abs(chi2 - state.chi2) < options.chi2_tolerance * state.fraction)
    )
    state.chi2 = chi2
    still = ~found.converged[state.index]
    found.n_iterations[state.index[still]] = iteration
    new = done & still
    at = state.index[new]
    found.x[..., at] = state.x[..., new]
    found.photon[at] = state.photon[new]
    found.chi2[at] = chi2[new]
    found.converged[at] = True
    return still & finite & ~done


def _step(
    state: _State,
    point: Linear,
    pulls: FloatArray,
    photon_sigma: FloatArray | None,
    softness: FloatArray,
    *,
    adapt: bool,
) -> None:
    """Move towards the minimum of the linearised problem.

    The curvature of the constraints is not in the linearised problem, so that the
    steps of one fit shrink or grow by a nearly constant, often negative factor. If
    a proposal is ``ratio`` times the last one, of which ``fraction`` was taken, the
    fraction ``fraction/(1 - ratio)`` would have led to the end at once (the secant
    rule for the step length).
    """
    right = point.violation + np.einsum("cpb,pb->cb", point.slopes, pulls)
    factor = cholesky(constraint_covariance(point.slopes, softness))
    multipliers = _solve_upper(factor, solve_lower(factor, right))
    shift = np.einsum("cpb,cb->pb", point.slopes, multipliers)
    measured = state.measured
    n = 3 * len(measured.values)
    move = pulls - shift
    if adapt:
        last = state.move
        ratio = np.einsum("pb,pb->b", move[:n], last) / np.einsum(
            "pb,pb->b", last, last
        )
        wanted = state.fraction / np.maximum(1.0 - ratio, 1e-3)
        state.fraction = np.clip(np.nan_to_num(wanted, nan=0.5), _SHORTEST, 1.0)
    state.move = move[:n]
    fraction = state.fraction
    x = state.x + fraction * measured.sigma * move[:n].reshape(state.x.shape)
    offset = softness[:, None] ** 2 * multipliers
    offset = state.offset + fraction * (offset - state.offset)
    # an energy may not jump through zero; inactive at the solution
    np.maximum(x[:, 0], 0.1 * state.x[:, 0], out=x[:, 0])
    state.x, state.offset = x, offset
    if photon_sigma is not None:
        energy = state.photon + fraction * photon_sigma * move[-1]
        limit = 0.5 * measured.sqrt_s
        state.photon = np.clip(energy, 0.1 * state.photon, 0.5 * (state.photon + limit))
