"""The same fits in other ways: with SciPy's minimisers, and in a loop over events.

The neutrino is not removed here: its momentum is three free parameters, and all seven
constraints stay. The code shares nothing with the package but the masses.
"""

from __future__ import annotations

import numpy as np

from toprecon.constants import TOP_MASS, W_MASS


def momentum(x, velocity):
    """Four-momentum and its derivatives (3, 4) by energy, polar angle, azimuth."""
    e, t, f = x
    st, ct, sf, cf = np.sin(t), np.cos(t), np.sin(f), np.cos(f)
    v = velocity
    p = np.array([e, e * v * st * cf, e * v * st * sf, e * v * ct])
    slope = np.array(
        [
            [1.0, v * st * cf, v * st * sf, v * ct],
            [0.0, e * v * ct * cf, e * v * ct * sf, -e * v * st],
            [0.0, -e * v * st * sf, e * v * st * cf, 0.0],
        ]
    )
    return p, slope


def constraints(u, fit):
    """Seven constraints [GeV] and their derivatives by the scaled parameters."""
    y, sigma, velocity, sqrt_s, *photon = fit
    n = len(y)
    x = y + sigma * u[: 3 * n].reshape(n, 3)
    p = np.zeros((6, 4))
    slopes = np.zeros((len(u), 6, 4))
    for i in range(n):
        p[i], part = momentum(x[i], velocity[i])
        slopes[3 * i : 3 * i + 3, i] = part * sigma[i][:, None]
    if n == 5:
        k = 10.0 * u[15:]
        size = np.sqrt(k @ k)
        p[5] = [size, *k]
        for j in range(3):
            slopes[15 + j, 5, 0] = 10.0 * k[j] / size
            slopes[15 + j, 5, 1 + j] = 10.0
    metric = np.array([1.0, -1.0, -1.0, -1.0])
    beam = sum(photon)  # energy of a photon, signed by its direction
    values = list(p.sum(axis=0) - np.array([sqrt_s - abs(beam), 0, 0, -beam]))
    rows = list(slopes.sum(axis=1).T)
    for members in ((1, 2), (4, 5)):
        q = p[list(members)].sum(axis=0)
        values.append(((q * metric) @ q - W_MASS**2) / (2 * W_MASS))
        rows.append(slopes[:, list(members)].sum(axis=1) @ (q * metric) / W_MASS)
    a, b = p[:3].sum(axis=0), p[3:].sum(axis=0)
    values.append(((a * metric) @ a - (b * metric) @ b) / (2 * TOP_MASS))
    rows.append(
        (
            slopes[:, :3].sum(axis=1) @ (a * metric)
            - slopes[:, 3:].sum(axis=1) @ (b * metric)
        )
        / TOP_MASS
    )
    return np.array(values), np.array(rows)


def start(fit):
    """Measured values, and the neutrino that balances their momenta."""
    y, _, velocity, *_ = fit
    if len(y) == 6:
        return np.zeros(18)
    total = sum(momentum(a, v)[0] for a, v in zip(y, velocity, strict=True))
    return np.concatenate([np.zeros(15), -total[1:] / 10.0])


def slsqp(fit):
    """Chi-square and fitted values by sequential quadratic programming."""
    from scipy.optimize import minimize

    n = 3 * len(fit[0])

    def gradient(u):
        out = np.zeros_like(u)
        out[:n] = 2 * u[:n]
        return out

    found = minimize(
        lambda u: u[:n] @ u[:n],
        start(fit),
        jac=gradient,
        method="SLSQP",
        constraints={
            "type": "eq",
            "fun": lambda u: constraints(u, fit)[0],
            "jac": lambda u: constraints(u, fit)[1],
        },
        options={"maxiter": 200, "ftol": 1e-9},
    )
    x = fit[0] + fit[1] * found.x[:n].reshape(-1, 3)
    return found.success, found.fun, x


def slsqp_with_photon(fit, side, b):
    """Chi-square and energy of a photon, by a search over its energy."""
    from scipy.optimize import minimize_scalar
    from scipy.special import erfinv

    limit = fit[3] / 2

    def chi2(k):
        prior = 2 * erfinv((k / limit) ** b) ** 2
        return slsqp((*fit, side * k))[1] + prior

    found = minimize_scalar(
        chi2, bounds=(1.0, 0.6 * limit), method="bounded", options={"xatol": 1e-3}
    )
    return found.fun, found.x


def soft_least_squares(fit, widths):
    """Chi-square with soft energy, W and top masses, by unconstrained least squares.

    ``widths`` are those of energy, W mass and difference of the top masses. Only for
    lepton+jets, where the neutrino takes the three momentum constraints.
    """
    from scipy.optimize import least_squares

    soft = np.array([widths[0], widths[1], widths[1], widths[2]])

    def residuals(z):
        y, sigma, velocity, _ = fit
        x = y + sigma * z.reshape(-1, 3)
        total = sum(momentum(a, v)[0] for a, v in zip(x, velocity, strict=True))
        values, _ = constraints(np.concatenate([z, -total[1:] / 10.0]), fit)
        return np.concatenate([z, values[[0, 4, 5, 6]] / soft])

    found = least_squares(residuals, np.zeros(15), xtol=1e-12, ftol=1e-12, gtol=1e-12)
    return 2 * found.cost


def loop(fit, max_iterations=30):
    """Chi-square by Lagrange multipliers in a plain loop: one small system a step."""
    u = start(fit)
    n = 3 * len(fit[0])
    size, m = len(u), 7
    last = np.inf
    for _ in range(max_iterations):
        values, rows = constraints(u, fit)
        chi2 = u[:n] @ u[:n]
        if np.abs(values).max() < 1e-3 and abs(chi2 - last) < 1e-3:
            return chi2
        last = chi2
        matrix = np.zeros((size + m, size + m))
        matrix[:n, :n] = np.eye(n)
        matrix[size:, :size] = rows
        matrix[:size, size:] = rows.T
        right = np.concatenate([np.zeros(size), rows @ u - values])
        u = np.linalg.solve(matrix, right)[:size]
    return np.nan


def one(measured, i):
    """Arguments of the functions above for one fit of a block."""
    return (
        measured.values[..., i],
        measured.sigma[..., i],
        measured.velocity[..., i],
        float(measured.sqrt_s[i]),
    )
