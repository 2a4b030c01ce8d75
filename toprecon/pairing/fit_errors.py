"""Pulls and the error of the top direction, at the end of a fit."""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import NDArray

from toprecon.pairing.fit_model import Linear, Measured, Model, linearise
from toprecon.pairing.fit_photon import photon_pull, radiator_exponent
from toprecon.pairing.fit_solver import (
    Solution,
    cholesky,
    constraint_covariance,
    solve_lower,
)

FloatArray = NDArray[np.float64]


@dataclasses.dataclass(frozen=True)
class Final:
    """What is known of a block of fits at their end.

    Parameters
    ----------
    momenta : array, shape (6, 4, B)
        Fitted E, px, py, pz of ``b f f`` of side A and of side B [GeV].
    pulls : array, shape (O, 3, B)
        (measured - fitted)/sqrt(V - V_fitted) of energy, polar angle and azimuth.
    cos_theta_error : array, shape (2, B)
        Error of the cosine of the polar angle of candidate A and of candidate B.
    """

    momenta: FloatArray
    pulls: FloatArray
    cos_theta_error: FloatArray


def finish(model: Model, measured: Measured, solution: Solution) -> Final:
    """Evaluate errors at the solutions of a block.

    Parameters
    ----------
    model : Model
        Constraints.
    measured : Measured
        Measurements.
    solution : Solution
        Where the fits ended; numbers of unconverged ones mean nothing.

    Returns
    -------
    Final
        Momenta, pulls and direction errors.

    Notes
    -----
    V_fitted = V - V A^T S^-1 A V with S = A V A^T. A parameter on which no constraint
    depends has no pull: NaN.
    """
    with np.errstate(all="ignore"):
        has_photon = model.photon
        point = linearise(
            model,
            measured,
            solution.x,
            solution.photon if has_photon else None,
            solution.side if has_photon else None,
        )
        if has_photon:
            point.slopes[:, -1] *= _photon_sigma(measured, solution)
        covariance = constraint_covariance(point.slopes, model.softness)
        reduced = solve_lower(cholesky(covariance), point.slopes)
        n = 3 * len(measured.values)
        gain = np.einsum("cpb,cpb->pb", reduced[:, :n], reduced[:, :n])
        shape = measured.values.shape
        pulls = (measured.values - solution.x) / (
            measured.sigma * np.sqrt(gain).reshape(shape)
        )
        errors = np.stack(
            [
                _cos_theta_error(model, measured, solution, point, reduced, side)
                for side in (0, 1)
            ]
        )
    return Final(point.momenta, pulls, errors)


def _photon_sigma(measured: Measured, solution: Solution) -> FloatArray:
    """Resolution of the photon's prior at the solution; 0 without a photon."""
    _, slope = photon_pull(
        solution.photon, 0.5 * measured.sqrt_s, radiator_exponent(measured.sqrt_s)
    )
    return np.where(solution.photon > 0, 1.0 / slope, 0.0)


def _cos_theta_error(
    model: Model,
    measured: Measured,
    solution: Solution,
    point: Linear,
    reduced: FloatArray,
    side: int,
) -> FloatArray:
    """Propagate the fitted covariance to the polar angle of one candidate."""
    momenta = point.momenta
    total = momenta[3 * side : 3 * side + 3].sum(axis=0)
    size = np.sqrt(total[1] ** 2 + total[2] ** 2 + total[3] ** 2)
    cosine = total[3] / size
    gradient = -cosine * total[1:] / size**2
    gradient[2] += 1.0 / size
    slopes = np.zeros(reduced.shape[1:])
    members = slice(3 * side, 3 * side + 3)
    if side == 1 and model.has_neutrino:
        # momentum balance: candidate B moves against candidate A and the photon
        members, gradient = slice(0, 3), -gradient
        if model.photon:
            along = solution.side * _photon_sigma(measured, solution)
            slopes[-1] = gradient[2] * along
    n = len(measured.values)
    block = slopes[: 3 * n].reshape(n, 3, -1)
    block[members] = np.einsum("uoib,ub->oib", point.directions[:, members], gradient)
    shared = np.einsum("cpb,pb->cb", reduced, slopes)
    variance = np.einsum("pb,pb->b", slopes, slopes) - np.einsum(
        "cb,cb->b", shared, shared
    )
    return np.sqrt(np.maximum(variance, 0.0))
