"""Squared matrix element of generated events, for any couplings.

Ratios of it turn a sample into one with other couplings. It is evaluated from the
momenta of the truth record with explicit two-spinors, and not with the formulas that
the generator draws from.
"""

from __future__ import annotations

from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.events import (
    TRUTH_MOMENTA,
    Helicity,
    components,
    require_fields,
    samples_of,
)
from toprecon.kinematics import mass, minkowski, to_rest_frame
from toprecon.treelevel import (
    ElectroweakInputs,
    FormFactors,
    Vertex,
    angular_terms,
    beam_fractions,
    vertex,
)

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]
_PAULI = np.array(
    [[[1, 0], [0, 1]], [[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]]
)


def matrix_element(
    events: ak.Array,
    inputs: ElectroweakInputs | None = None,
    form_factors: FormFactors | None = None,
) -> FloatArray:
    """Return |M|^2 of e+e- -> t tbar -> six fermions for every event.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events with truth; ``helicity`` says which beams, mixed ones are summed with
        the polarisations of their sample.
    inputs : ElectroweakInputs, optional
        Couplings, masses and widths.
    form_factors : FormFactors, optional
        Couplings of the top to photon and Z; tree level if absent.

    Returns
    -------
    array, shape (E,)
        Up to a constant factor: for use in ratios. NaN without truth.

    Notes
    -----
    The two diagrams with a pair of tops, averaged and summed over the spins of beams
    and fermions. The decays t -> b W -> b f f' at tree level: by the Fierz identity
    the amplitude is that for a spinor of the down-type fermion times (p_b.p_up). The
    tops have the masses of the event. Every propagator is included.
    """
    require_fields(events, ("truth", "helicity", "sample"), where="events")
    require_fields(events.truth, TRUTH_MOMENTA, where="events.truth")
    inputs = inputs or ElectroweakInputs()
    p = {name: components(events.truth[name]) for name in TRUTH_MOMENTA}
    chain = _PairFrame(p)
    common = _decay_factors(p, inputs)
    result = np.zeros(len(events))
    for sign, share in zip((-1, 1), beam_shares(events), strict=True):
        if np.any(share > 0):
            x = vertex(chain.energy, sign, inputs, form_factors)
            result += share * np.abs(chain.amplitude(x, sign, inputs.top_mass)) ** 2
    return result * common / chain.energy**4


def coupling_weights(
    events: ak.Array,
    form_factors: FormFactors,
    *,
    inputs: ElectroweakInputs | None = None,
    generated: FormFactors | None = None,
) -> FloatArray:
    """Return weights that turn events into events with other top couplings.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events with truth.
    form_factors : FormFactors
        Couplings wanted.
    inputs : ElectroweakInputs, optional
        Couplings and masses the events were generated with.
    generated : FormFactors, optional
        Form factors the events were generated with; tree level if absent.

    Returns
    -------
    array, shape (E,)
        Ratio of squared matrix elements; the mean is the ratio of cross sections. NaN
        without truth.
    """
    wanted = matrix_element(events, inputs, form_factors)
    with np.errstate(invalid="ignore", divide="ignore"):
        return wanted / matrix_element(events, inputs, generated)


def angle_weights(
    events: ak.Array,
    *,
    asymmetry_factor: float,
    inputs: ElectroweakInputs | None = None,
    form_factors: FormFactors | None = None,
) -> FloatArray:
    """Return weights that scale the asymmetry and change nothing else.

    Parameters
    ----------
    events : ak.Array, shape (E,)
        Events with truth.
    asymmetry_factor : float
        Factor on the term of d sigma / d cos(theta) that is odd in cos(theta).
    inputs : ElectroweakInputs, optional
        Couplings and masses the events were generated with.
    form_factors : FormFactors, optional
        Form factors the events were generated with; tree level if absent.

    Returns
    -------
    array, shape (E,)
        Ratio of d sigma / d cos(theta) at the mass and the angle of the event in the
        pair frame. Negative where the factor is too large for a distribution; NaN
        without truth.
    """
    require_fields(events, ("truth", "helicity", "sample"), where="events")
    top, antitop = (components(events.truth[x]) for x in ("top", "antitop"))
    pair = top + antitop
    energy = mass(pair)
    in_pair_frame = to_rest_frame(top, pair)
    axis = beam_axis(pair)
    size = np.sqrt(np.sum(in_pair_frame[1:] ** 2, axis=0))
    with np.errstate(invalid="ignore", divide="ignore"):
        cosine = np.sum(in_pair_frame[1:] * axis, axis=0) / size
    even, odd = np.zeros(len(events)), np.zeros(len(events))
    for sign, share in zip((-1, 1), beam_shares(events), strict=True):
        terms = angular_terms(energy, sign, inputs, form_factors)
        even += share * (
            terms.transverse * (1 + cosine**2) + terms.longitudinal * (1 - cosine**2)
        )
        odd += share * terms.linear * cosine
    with np.errstate(invalid="ignore", divide="ignore"):
        return (even + asymmetry_factor * odd) / (even + odd)


def beam_shares(events: ak.Array) -> tuple[FloatArray, FloatArray]:
    """Return the weights of e-L e+R and e-R e+L in the beams of every event."""
    left, right = np.zeros(len(events)), np.zeros(len(events))
    sample, helicity = ak.to_numpy(events.sample), ak.to_numpy(events.helicity)
    for row, description in enumerate(samples_of(events)):
        mixed = (sample == row) & (helicity == Helicity.MIXED)
        left[mixed], right[mixed] = beam_fractions(
            description.electron_polarisation, description.positron_polarisation
        )
    left[helicity == Helicity.LR] = 1.0
    right[helicity == Helicity.RL] = 1.0
    return left, right


def beam_axis(pair: FloatArray) -> FloatArray:
    """Return the direction of the electron against the positron in the pair frame.

    Parameters
    ----------
    pair : array, shape (4, E)
        Momentum of the pair in the laboratory [GeV].

    Returns
    -------
    array, shape (3, E)
        Unit vectors. For radiation along the beams both are back to back; else the
        axis halves the angle between the electron and the reversed positron.
    """
    shape = pair.shape[1:]
    one, zero = np.ones(shape), np.zeros(shape)
    beams = [
        to_rest_frame(np.stack([one, zero, zero, sign * one]), pair) for sign in (1, -1)
    ]
    axis = beams[0][1:] / beams[0][0] - beams[1][1:] / beams[1][0]
    return axis / np.sqrt(np.sum(axis**2, axis=0))


class _PairFrame:
    """Momenta of the events in the pair frame, with the electron along z."""

    def __init__(self, p: dict[str, FloatArray]) -> None:
        pair = p["top"] + p["antitop"]
        self.energy = mass(pair)
        rotate = _rotation_to_z(beam_axis(pair))

        def move(q: FloatArray) -> FloatArray:
            q = to_rest_frame(q, pair)
            return np.concatenate([q[:1], np.einsum("ij...,j...->i...", rotate, q[1:])])

        self.top, self.antitop = move(p["top"]), move(p["antitop"])
        self.top_mass, self.antitop_mass = mass(p["top"]), mass(p["antitop"])
        self.first = _spinor(move(p["w_plus_down"]))
        self.second = _spinor(move(p["w_minus_down"]))

    def amplitude(self, x: Vertex, sign: int, nominal_mass: float) -> ComplexArray:
        """ubar(d1) (p_t + m) Gamma.L (-p_tbar + m) u(d2), chiral representation."""
        first, second = np.conj(self.first), self.second
        row_right = np.asarray(self.top_mass * first, dtype=np.complex128)
        row_left = _times(first, _sigma_dot(self.top, -1.0))
        column_left = -_apply(_sigma_dot(self.antitop, -1.0), second)
        column_right = np.asarray(self.antitop_mass * second, dtype=np.complex128)
        left, right = x.vector - x.axial, x.vector + x.axial
        scale = self.energy / (2 * nominal_mass)
        tensor, dipole = x.tensor * scale, x.dipole * scale
        total = np.zeros(self.energy.shape, dtype=np.complex128)
        # current of the electrons: (1, i sign, 0), their helicities along the beam
        for index, current in ((1, 1.0), (2, 1j * sign)):
            s = _PAULI[index]
            ll = _between(row_left, s, column_left)
            rr = _between(row_right, s, column_right)
            rl = _between(row_right, s, column_left)
            lr = _between(row_left, s, column_right)
            total = total + current * (
                -left * ll + right * rr - tensor * (rl - lr) - 1j * dipole * (rl + lr)
            )
        return total


def _decay_factors(p: dict[str, FloatArray], inputs: ElectroweakInputs) -> FloatArray:
    """Resonances and the products (p_b.p_up) of both sides."""
    factor = minkowski(p["b"], p["w_plus_up"]) * minkowski(p["bbar"], p["w_minus_up"])
    for name, m, width in (
        ("top", inputs.top_mass, inputs.top_width),
        ("antitop", inputs.top_mass, inputs.top_width),
        ("w_plus", inputs.w_mass, inputs.w_width),
        ("w_minus", inputs.w_mass, inputs.w_width),
    ):
        offset = minkowski(p[name], p[name]) - m**2
        factor = factor / (offset**2 + (m * width) ** 2)
    return factor


def _spinor(p: FloatArray) -> ComplexArray:
    """Two-spinor of a massless right-handed fermion, shape (2, E)."""
    plus = np.maximum(p[0] + p[3], 0.0)
    upper = np.sqrt(plus)
    # along -z the spinor is (0, 1) up to a phase that cancels
    lower = np.where(
        plus > 1e-12 * p[0],
        (p[1] + 1j * p[2]) / np.maximum(upper, 1e-150),
        np.sqrt(2 * np.abs(p[0])),
    )
    return np.stack([upper.astype(np.complex128), lower])


def _sigma_dot(p: FloatArray, sign: float) -> ComplexArray:
    """E + sign p.sigma, shape (2, 2, E)."""
    e, x, y, z = p[0], sign * p[1], sign * p[2], sign * p[3]
    return np.array([[e + z, x - 1j * y], [x + 1j * y, e - z]])


def _times(row: ComplexArray, matrix: ComplexArray) -> ComplexArray:
    return np.einsum("i...,ij...->j...", row, matrix)


def _apply(matrix: ComplexArray, column: ComplexArray) -> ComplexArray:
    return np.einsum("ij...,j...->i...", matrix, column)


def _between(row: ComplexArray, matrix: Any, column: ComplexArray) -> ComplexArray:
    return np.einsum("i...,ij,j...->...", row, matrix, column)


def _rotation_to_z(axis: FloatArray) -> FloatArray:
    """Rotation matrices that turn unit vectors to +z, shape (3, 3, E)."""
    x, y, z = axis
    rho = np.hypot(x, y)
    safe = np.where(rho > 0, rho, 1.0)
    c, s = np.where(rho > 0, x / safe, 1.0), np.where(rho > 0, y / safe, 0.0)
    zero = np.zeros_like(z)
    return np.array([[z * c, z * s, -rho], [-s, c, zero], [rho * c, rho * s, z]])
