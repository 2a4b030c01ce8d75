from __future__ import annotations

import numpy as np
import pytest

from tests.pairing.fit_toys import EXACT, measure, partons
from toprecon.pairing.fit_errors import finish
from toprecon.pairing.fit_model import Model, linearise
from toprecon.pairing.fit_photon import photon_pull, radiator_exponent
from toprecon.pairing.fit_solver import solve


@pytest.mark.parametrize("leptonic", [True, False])
def test_errors_are_those_of_dense_linear_algebra(rng, leptonic):
    options = EXACT.replace(isr=True, w_width=1.0, energy_width=2.0)
    model = Model(options, leptonic)
    p, photon = partons(rng, 300, isr=True)
    _, measured = measure(rng, p, leptonic=leptonic)
    measured = measured.take(np.flatnonzero(np.abs(photon) > 30)[:12])
    solution = solve(model, measured)
    final = finish(model, measured, solution)
    n = 3 * len(measured.values)
    _, slope = photon_pull(
        np.where(solution.side != 0, solution.photon, 1.0),
        np.full(12, 250.0),
        np.full(12, radiator_exponent(500.0)),
    )

    def at(x, k):
        point = linearise(model, measured, x, k, solution.side)
        cosines = [
            q[3] / np.sqrt((q[1:] ** 2).sum(axis=0))
            for q in (point.momenta[:3].sum(axis=0), point.momenta[3:].sum(axis=0))
        ]
        return point.violation, np.array(cosines)

    jacobian = np.zeros((model.n_constraints, n + 1, 12))
    gradient = np.zeros((2, n + 1, 12))
    step = 1e-4
    for i in range(n + 1):
        shift = np.zeros((n + 1, 12))
        shift[i] = step
        dx, dk = shift[:n].reshape(measured.values.shape), shift[n]
        up = at(solution.x + dx, solution.photon + dk)
        down = at(solution.x - dx, solution.photon - dk)
        jacobian[:, i] = (up[0] - down[0]) / (2 * step)
        gradient[:, i] = (up[1] - down[1]) / (2 * step)
    assert solution.converged.all()
    assert (solution.side != 0).sum() > 6
    for b in range(12):
        prior = 1 / slope[b] if solution.side[b] else 0.0
        v = np.diag(np.append(measured.sigma[..., b].ravel(), prior) ** 2)
        a = jacobian[..., b]
        s = a @ v @ a.T + np.diag(model.softness**2)
        shrink = v @ a.T @ np.linalg.solve(s, a @ v)
        fitted = v - shrink
        error = np.sqrt([g @ fitted @ g for g in gradient[..., b]])
        # finite differences
        np.testing.assert_allclose(final.cos_theta_error[:, b], error, rtol=1e-3)
        pulls = (measured.values - solution.x)[..., b].ravel() / np.sqrt(
            np.diag(shrink)[:n]
        )
        np.testing.assert_allclose(final.pulls[..., b].ravel(), pulls, rtol=1e-3)
