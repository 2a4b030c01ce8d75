"""Constraints of a top pair and their derivatives, on blocks of fits.

Six fermions: ``b f f`` of side A, then ``b f f`` of side B. Each measured one has
the parameters energy, polar angle and azimuth at fixed velocity (the mass scales with
the energy, as it does when particles of a jet are lost). In lepton+jets side B holds
b, lepton and neutrino, and the neutrino is whatever momentum balance leaves: it takes
three constraints away and leaves no unmeasured parameter.

The last axis always runs over the fits of a block, so that every operation is a
vector operation on contiguous memory. Letters: O objects measured (5 or 6), C
constraints, P parameters (3 O, and one more with a photon), B fits of the block.
"""

from __future__ import annotations

import dataclasses
import math

import numpy as np
from numpy.typing import NDArray

from toprecon.pairing.fit_options import FitOptions, TopMasses

FloatArray = NDArray[np.float64]

W_A, W_B = slice(1, 3), slice(4, 6)
TOP_A, TOP_B = slice(0, 3), slice(3, 6)


@dataclasses.dataclass(frozen=True)
class Measured:
    """What was measured in a block of fits.

    Parameters
    ----------
    values, sigma : array, shape (O, 3, B)
        Energy [GeV], polar angle, azimuth [rad], and their resolutions.
    velocity : array, shape (O, B)
        |p|/E of each object.
    sqrt_s : array, shape (B,)
        Collision energy [GeV].
    """

    values: FloatArray
    sigma: FloatArray
    velocity: FloatArray
    sqrt_s: FloatArray

    def take(self, which: NDArray[np.generic]) -> Measured:
        """Return some of the fits, by mask or index."""
        return Measured(
            self.values[..., which],
            self.sigma[..., which],
            self.velocity[..., which],
            self.sqrt_s[which],
        )


@dataclasses.dataclass(frozen=True)
class Model:
    """Which constraints are applied, and to what.

    Parameters
    ----------
    options : FitOptions
        Masses and switches.
    has_neutrino : bool
        Whether the last fermion of side B is a neutrino left over by the balance.
    """

    options: FitOptions
    has_neutrino: bool

    @property
    def softness(self) -> FloatArray:
        """Gaussian width of every constraint, shape (C,) [GeV]; 0 is exact."""
        o = self.options
        soft: list[float] = []
        if o.four_momentum:
            soft += [o.energy_width] + [0.0] * (0 if self.has_neutrino else 3)
        if o.w_masses:
            soft += [o.w_width] * 2
        if o.top_masses is TopMasses.EQUAL:
            soft += [o.top_width * math.sqrt(2.0)]
        elif o.top_masses is TopMasses.FIXED:
            soft += [o.top_width] * 2
        return np.array(soft)

    @property
    def n_constraints(self) -> int:
        """Number of constraints left, which is the number of degrees of freedom."""
        return len(self.softness)

    @property
    def photon(self) -> bool:
        """Whether a photon can be told from nothing: it needs the energy balance."""
        return self.options.isr and self.options.four_momentum


@dataclasses.dataclass(frozen=True)
class Linear:
    """The model at one point, linearised.

    Parameters
    ----------
    momenta : array, shape (6, 4, B)
        E, px, py, pz of the six fermions [GeV].
    violation : array, shape (C, B)
        Values of the constraints [GeV]; 0 where they hold.
    slopes : array, shape (C, P, B)
        Derivatives times the resolution of the parameter [GeV]; the column of the
        photon, if any, is last and not yet scaled.
    directions : array, shape (3, O, 3, B)
        Derivatives of px, py, pz of each object, scaled likewise.
    """

    momenta: FloatArray
    violation: FloatArray
    slopes: FloatArray
    directions: FloatArray


def photon_momentum(
    energy: FloatArray, side: FloatArray, crossing_angle: float
) -> FloatArray:
    """Return the momentum of a photon along a beam.

    Parameters
    ----------
    energy, side : array, shape (B,)
        Energy [GeV]; +1 along the electron beam, -1 along the positron beam, 0 none.
    crossing_angle : float
        Angle between the beams [rad]; both lean towards +x by half of it.

    Returns
    -------
    array, shape (4, B)
        E, px, py, pz [GeV].
    """
    size = energy * np.abs(side)
    sine, cosine = math.sin(crossing_angle / 2), math.cos(crossing_angle / 2)
    return np.stack([size, size * sine, np.zeros_like(size), energy * side * cosine])


def linearise(
    model: Model,
    measured: Measured,
    x: FloatArray,
    photon: FloatArray | None = None,
    side: FloatArray | None = None,
) -> Linear:
    """Evaluate constraints and derivatives.

    Parameters
    ----------
    model : Model
        Which constraints.
    measured : Measured
        Resolutions, velocities and collision energies.
    x : array, shape (O, 3, B)
        Energy [GeV], polar angle, azimuth [rad] at which to evaluate.
    photon, side : array, shape (B,), optional
        Photon energies [GeV] and the beams they follow; no photon if left out.

    Returns
    -------
    Linear
        Momenta, violations and scaled slopes.
    """
    p, directions = _objects(measured, x)
    sine = math.sin(model.options.crossing_angle / 2)
    missing = np.zeros((4, x.shape[2]))
    missing[0] = measured.sqrt_s
    missing[1] = measured.sqrt_s * sine
    unit = None
    if photon is not None and side is not None:
        unit = photon_momentum(np.ones_like(photon), side, model.options.crossing_angle)
        missing -= photon * unit
    n = x.shape[0]
    missing -= p[:n].sum(axis=0)
    if model.has_neutrino:
        p[5, 1:] = missing[1:]
        p[5, 0] = np.sqrt(missing[1] ** 2 + missing[2] ** 2 + missing[3] ** 2)
    violation = np.empty((model.n_constraints, x.shape[2]))
    slopes = np.empty((model.n_constraints, 3 * n + (unit is not None), x.shape[2]))
    rows = _Rows(p, directions, measured.sigma[:, 0], violation, slopes, unit)
    _fill(model, rows, missing)
    return Linear(p, violation, slopes, directions)


def _objects(measured: Measured, x: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Momenta of the measured objects, and their scaled spatial derivatives."""
    energy, theta, phi = x[:, 0], x[:, 1], x[:, 2]
    n, size = energy.shape
    p = np.empty((6, 4, size))
    directions = np.empty((3, n, 3, size))
    sin_theta, cos_theta = np.sin(theta), np.cos(theta)
    sin_phi, cos_phi = np.sin(phi), np.cos(phi)
    v_t = measured.velocity * sin_theta
    v = (v_t * cos_phi, v_t * sin_phi, measured.velocity * cos_theta)
    sigma = measured.sigma
    p[:n, 0] = energy
    for i in range(3):
        np.multiply(energy, v[i], out=p[:n, 1 + i])
        np.multiply(v[i], sigma[:, 0], out=directions[i, :, 0])
    along = p[:n, 3] * sigma[:, 1]
    np.multiply(along, cos_phi, out=directions[0, :, 1])
    np.multiply(along, sin_phi, out=directions[1, :, 1])
    np.multiply(-energy * v_t, sigma[:, 1], out=directions[2, :, 1])
    np.multiply(-p[:n, 2], sigma[:, 2], out=directions[0, :, 2])
    np.multiply(p[:n, 1], sigma[:, 2], out=directions[1, :, 2])
    directions[2, :, 2] = 0.0
    return p, directions


class _Rows:
    """Fills one constraint after the other."""

    def __init__(
        self,
        p: FloatArray,
        directions: FloatArray,
        sigma_energy: FloatArray,
        violation: FloatArray,
        slopes: FloatArray,
        unit: FloatArray | None,
    ) -> None:
        self.p = p
        self.directions = directions
        self.sigma_energy = sigma_energy
        self.violation = violation
        self.slopes = slopes
        self.unit = unit
        self.n = directions.shape[1]
        self.row = 0

    def add(
        self,
        value: FloatArray,
        groups: list[tuple[slice, FloatArray]],
        *,
        spread: FloatArray | None = None,
        photon: FloatArray | float = 0.0,
    ) -> None:
        """Add a constraint with gradients (4, B) for groups of objects.

        ``spread`` (3, B) is minus the gradient that a momentum of any object has
        through the neutrino; ``photon`` is the direct derivative by its energy.
        """
        self.violation[self.row] = value
        size = value.shape[0]
        out = self.slopes[self.row, : 3 * self.n].reshape(self.n, 3, size)
        # groups are ordered and the gaps between them are other objects
        done = 0
        for which, gradient in groups:
            first, last, _ = which.indices(self.n)
            if first >= last:
                continue
            self._contract(out, slice(done, first), spread, negate=True)
            spatial = gradient[1:] if spread is None else gradient[1:] - spread
            self._contract(out, slice(first, last), spatial)
            out[first:last, 0] += gradient[0] * self.sigma_energy[first:last]
            done = last
        self._contract(out, slice(done, self.n), spread, negate=True)
        if self.unit is not None:
            column = np.broadcast_to(photon, size)
            if spread is not None:
                column = column - np.einsum("ub,ub->b", spread, self.unit[1:])
            self.slopes[self.row, 3 * self.n] = column
        self.row += 1

    def _contract(
        self,
        out: FloatArray,
        which: slice,
        spatial: FloatArray | None,
        *,
        negate: bool = False,
    ) -> None:
        """Turn a momentum gradient into parameter slopes of some objects."""
        if which.start >= which.stop:
            return
        if spatial is None:
            out[which] = 0.0
            return
        vector = -spatial if negate else spatial
        part = self.directions[:, which]
        target = out[which]
        np.multiply(part[0], vector[0], out=target)
        target += part[1] * vector[1]
        target += part[2] * vector[2]


def _fill(model: Model, rows: _Rows, missing: FloatArray) -> None:
    """Write all constraints, in the order of ``Model.softness``."""
    options, p = model.options, rows.p
    w_a, w_b = p[1] + p[2], p[4] + p[5]
    top_a, top_b = p[0] + w_a, p[3] + w_b
    flight = None
    if model.has_neutrino:
        # the direction of a vanishing neutrino is undefined: NaN, the fit is lost
        flight = p[5, 1:] / p[5, 0]
    if options.four_momentum:
        _fill_balance(rows, missing, flight)
    if options.w_masses:
        value, gradient = _mass(w_a, options.w_mass)
        rows.add(value, [(W_A, gradient)])
        value, gradient = _mass(w_b, options.w_mass)
        rows.add(value, [(W_B, gradient)], spread=_through(gradient, flight))
    if options.top_masses is TopMasses.FREE:
        return
    value_a, gradient_a = _mass(top_a, options.top_mass)
    value_b, gradient_b = _mass(top_b, options.top_mass)
    spread = _through(gradient_b, flight)
    if options.top_masses is TopMasses.FIXED:
        rows.add(value_a, [(TOP_A, gradient_a)])
        rows.add(value_b, [(TOP_B, gradient_b)], spread=spread)
        return
    rows.add(
        value_a - value_b,
        [(TOP_A, gradient_a), (TOP_B, -gradient_b)],
        spread=None if spread is None else -spread,
    )


def _fill_balance(rows: _Rows, missing: FloatArray, flight: FloatArray | None) -> None:
    """Energy, and without a neutrino momentum; what is missing has to vanish."""
    everything = slice(0, 6)
    gradient = np.zeros_like(missing)
    gradient[0] = 1.0
    if flight is not None:
        # energy left for the neutrino against the momentum left for it
        rows.add(
            rows.p[5, 0] - missing[0],
            [(everything, gradient)],
            spread=flight,
            photon=1.0,
        )
        return
    for i in range(4):
        gradient = np.zeros_like(missing)
        gradient[i] = 1.0
        unit = 0.0 if rows.unit is None else rows.unit[i]
        rows.add(-missing[i], [(everything, gradient)], photon=unit)


def _mass(system: FloatArray, target: float) -> tuple[FloatArray, FloatArray]:
    """(M^2 - target^2)/(2 target) and its gradient by the momenta of the members."""
    e, x, y, z = system
    value = (e**2 - x**2 - y**2 - z**2 - target**2) / (2.0 * target)
    return value, np.stack([e, -x, -y, -z]) / target


def _through(gradient: FloatArray, flight: FloatArray | None) -> FloatArray | None:
    """Gradient by the neutrino's three-momentum, its energy following."""
    if flight is None:
        return None
    return gradient[1:] + gradient[0] * flight
