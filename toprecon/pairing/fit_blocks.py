"""The constrained fit of events, block by block."""

from __future__ import annotations

from typing import Any

import awkward as ak
import numpy as np

from toprecon.events import Channel, Status
from toprecon.pairing.fit_errors import finish
from toprecon.pairing.fit_inputs import FitInputs, finite_fits, first_status, prepare
from toprecon.pairing.fit_model import Model, photon_momentum
from toprecon.pairing.fit_options import FitOptions
from toprecon.pairing.fit_result import FitResult
from toprecon.pairing.fit_solver import solve

BLOCK = 4096  # fits; the arrays of a block stay near the processor


def fit(
    events: ak.Array,
    assignment: Any,
    options: FitOptions | None = None,
    *,
    channel: Channel,
) -> FitResult:
    """Fit jets and lepton of every event to the constraints of a top pair.

    The measured energies and directions are moved as little as possible, in units of
    their resolutions, until energy and momentum balance and the candidates have the
    demanded masses. The neutrino, if any, takes the momentum that is left. A fit that
    fails is reported in ``status`` and never raises.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events; fields ``jets``, ``sqrt_s``, and ``leptons`` for lepton+jets, of which
        the first one of each event is used.
    assignment : array of int, shape (E, 6) or (E, K, 6)
        Jets of the top (b, q, q) and of the antitop; the leptonic side of lepton+jets
        has its b and -1, -1.
    options : FitOptions, optional
        Constraints, resolutions, iteration.
    channel : Channel
        Decay channel.

    Returns
    -------
    FitResult
        Arrays of shape (E,) or (E, K).

    Raises
    ------
    MissingFieldError
        If the events lack a field.
    OptionError
        If the assignment has the wrong form, or the constraints do not suit the
        channel.

    Notes
    -----
    Least squares with Lagrange multipliers, iterated. Degrees of freedom with all
    constraints: 7 all-hadronic, 4 lepton+jets; one more with fixed top masses. The
    photon has a parameter and a prior and does not change the count.

    References
    ----------
    Photon prior: Beckmann, List, List, Nucl. Instrum. Meth. A 624 (2010) 184.
    """
    options = FitOptions() if options is None else options
    channel = Channel(channel)
    inputs = prepare(events, assignment, options, channel)
    model = Model(options, has_neutrino=channel is Channel.LEPTON_JETS)
    flat = _fit_all(inputs, model)
    return _reshaped(flat, np.shape(assignment)[:-1])


def _fit_all(inputs: FitInputs, model: Model) -> FitResult:
    """Fit all usable fits in blocks; shape (F,)."""
    from scipy.special import chdtrc

    n = len(inputs.event_index)
    result = FitResult(
        status=first_status(inputs),
        chi2=np.full(n, np.nan),
        probability=np.full(n, np.nan),
        degrees_of_freedom=model.n_constraints,
        n_iterations=np.zeros(n, dtype=np.int16),
        momenta=np.full((4, n, 6), np.nan),
        photon=np.full((4, n), np.nan),
        pulls=np.full((n, 6, 3), np.nan),
        cos_theta_error=np.full((n, 2), np.nan),
        leptonic_side=inputs.leptonic_side,
    )
    todo = np.flatnonzero(inputs.usable)
    for start in range(0, len(todo), BLOCK):
        _fit_block(inputs, model, todo[start : start + BLOCK], result)
    result.probability[:] = chdtrc(model.n_constraints, result.chi2)
    return result


def _fit_block(
    inputs: FitInputs, model: Model, fits: np.ndarray, result: FitResult
) -> None:
    """Fit one block and write it into the result."""
    measured = inputs.measured(fits, model.options)
    finite = finite_fits(measured)
    result.status[fits[~finite]] = Status.NON_FINITE
    fits, measured = fits[finite], measured.take(finite)
    if not len(fits):
        return
    solution = solve(model, measured)
    result.n_iterations[fits] = solution.n_iterations
    good = solution.converged
    final = finish(model, measured, solution)
    at = fits[good]
    result.status[at] = Status.OK
    result.chi2[at] = solution.chi2[good]
    result.photon[:, at] = photon_momentum(
        solution.photon[good], solution.side[good], model.options.crossing_angle
    )
    # side A, which is hadronic, is the antitop if the top is the leptonic side
    swapped = inputs.leptonic_side[at] > 0
    momenta = final.momenta[..., good].transpose(1, 2, 0)
    turned = swapped[:, None]
    result.momenta[:, at] = np.where(turned, np.roll(momenta, 3, axis=2), momenta)
    pulls = np.full((len(at), 6, 3), np.nan)
    n_measured = len(final.pulls)
    pulls[:, :n_measured] = final.pulls[..., good].transpose(2, 0, 1)
    result.pulls[at] = np.where(turned[:, None], np.roll(pulls, 3, axis=1), pulls)
    errors = final.cos_theta_error[:, good].T
    result.cos_theta_error[at] = np.where(turned, errors[:, ::-1], errors)


def _reshaped(flat: FitResult, shape: tuple[int, ...]) -> FitResult:
    """Give arrays over fits the shape of the assignments."""
    return FitResult(
        status=flat.status.reshape(shape),
        chi2=flat.chi2.reshape(shape),
        probability=flat.probability.reshape(shape),
        degrees_of_freedom=flat.degrees_of_freedom,
        n_iterations=flat.n_iterations.reshape(shape),
        momenta=flat.momenta.reshape(4, *shape, 6),
        photon=flat.photon.reshape(4, *shape),
        pulls=flat.pulls.reshape(*shape, 6, 3),
        cos_theta_error=flat.cos_theta_error.reshape(*shape, 2),
        leptonic_side=flat.leptonic_side.reshape(shape),
    )
