"""Cross sections and asymmetries of both beam helicities from polarised runs.

No beam is fully polarised: each run sees a mix of e-L e+R and e-R e+L. The forward and
backward events of two or more runs with different polarisations are solved for the
pure rates; efficiency, flips and acceptance then give (sigma_L, sigma_R, A_L, A_R)
with one covariance from the data and one from the polarimeters.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Iterable, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.asymmetry.result import AsymmetryResult
from toprecon.errors import StudyError
from toprecon.options import Options, option
from toprecon.statistics import Measured
from toprecon.treelevel import beam_fractions

FloatArray = NDArray[np.float64]

NAMES = ("sigma_L", "sigma_R", "A_L", "A_R")
"""What the covariances are of; cross sections in fb."""


class BeamRun(Options):
    """Data taken with one setting of the beams."""

    electron_polarisation: float = option(
        ..., "polarisation of the electron beam, > 0 right-handed", low=-1, high=1
    )
    positron_polarisation: float = option(
        ..., "polarisation of the positron beam, > 0 right-handed", low=-1, high=1
    )
    luminosity: float = option(..., "integrated luminosity", unit="fb^-1", above=0)
    electron_error: float = option(
        0.0, "error of the electron polarisation", low=0, high=1
    )
    positron_error: float = option(
        0.0, "error of the positron polarisation", low=0, high=1
    )


@dataclasses.dataclass(frozen=True)
class HelicityObservables:
    """Cross sections and asymmetries of both helicities with their covariance.

    Parameters
    ----------
    values : array, shape (4,)
        In the order of :data:`NAMES`; they are those of the simulation.
    data_covariance : array, shape (4, 4)
        Poisson fluctuations of the selected events of the runs, background included.
    polarisation_covariance : array, shape (4, 4)
        Errors of the polarisations, independent for each run and beam.
    efficiencies : tuple of Measured
        Of e-L e+R and e-R e+L, with the errors of the simulated sample.
    """

    values: FloatArray
    data_covariance: FloatArray
    polarisation_covariance: FloatArray
    efficiencies: tuple[Measured, Measured]

    @property
    def covariance(self) -> FloatArray:
        """Sum of both."""
        return self.data_covariance + self.polarisation_covariance

    def __getitem__(self, name: str) -> Measured:
        position = NAMES.index(name)
        variance = self.covariance[position, position]
        return Measured(float(self.values[position]), float(np.sqrt(variance)))

    def __str__(self) -> str:
        rows = zip(NAMES, (" fb", " fb", "", ""), self.correlation, strict=True)
        lines = [_line(name, self[name], unit, row) for name, unit, row in rows]
        of_ratio = [self.left_right_correlation(name) for name in NAMES]
        return "\n".join([*lines, _line("A_LR", self.left_right, "", of_ratio)])

    def to_mapping(self) -> dict[str, Any]:
        """Return plain data: the four, A_LR, and the covariances."""
        return {
            "names": list(NAMES),
            "values": self.values.tolist(),
            "data_covariance": self.data_covariance.tolist(),
            "polarisation_covariance": self.polarisation_covariance.tolist(),
            "efficiencies": [e.to_mapping() for e in self.efficiencies],
            "A_LR": self.left_right.to_mapping(),
            "A_LR_correlation": [self.left_right_correlation(n) for n in NAMES],
        }

    @property
    def correlation(self) -> FloatArray:
        """Correlations of the four, shape (4, 4)."""
        errors = np.sqrt(np.diagonal(self.covariance))
        return self.covariance / np.outer(errors, errors)

    @property
    def left_right(self) -> Measured:
        """A_LR = (sigma_L - sigma_R)/(sigma_L + sigma_R)."""
        gradient = self._left_right_gradient
        left, right = self.values[:2]
        variance = gradient @ self.covariance @ gradient
        return Measured(
            float((left - right) / (left + right)), float(np.sqrt(variance))
        )

    def left_right_correlation(self, name: str) -> float:
        """Return the correlation of A_LR with one of the four.

        Parameters
        ----------
        name : str
            Of :data:`NAMES`.

        Returns
        -------
        float
            In [-1, 1].
        """
        both = (self.covariance @ self._left_right_gradient)[NAMES.index(name)]
        return float(both / (self.left_right.error * self[name].error))

    @property
    def _left_right_gradient(self) -> FloatArray:
        left, right = self.values[:2]
        total = (left + right) ** 2
        return np.array([2 * right / total, -2 * left / total, 0.0, 0.0])


def helicity_observables(
    left: AsymmetryResult,
    right: AsymmetryResult,
    runs: Sequence[BeamRun],
    *,
    luminosity: float,
) -> HelicityObservables:
    """Predict what polarised runs tell about both helicities.

    Parameters
    ----------
    left, right : AsymmetryResult
        Of pure e-L e+R and e-R e+L beams, weights scaled to expected events.
    runs : sequence of BeamRun
        At least two with different mixes.
    luminosity : float
        To which the weights were scaled [fb^-1].

    Returns
    -------
    HelicityObservables
        Values and covariances.

    Raises
    ------
    StudyError
        If the weights are not expected events or the runs cannot be told apart.
    """
    if not luminosity > 0:
        msg = (
            "cross sections: expected events at a luminosity are required; state a "
            f"luminosity and cross sections (got a luminosity of {luminosity:g})"
        )
        raise StudyError(msg)
    mix = np.array(
        [beam_fractions(r.electron_polarisation, r.positron_polarisation) for r in runs]
    ).reshape(-1, 2)
    if np.linalg.matrix_rank(mix, tol=1e-9) < 2:
        msg = (
            "cross sections per helicity: two runs with different mixes of e-L e+R and "
            f"e-R e+L are required; got mixes {mix.tolist()}"
        )
        raise StudyError(msg)
    lumi = np.array([run.luminosity for run in runs])
    exposure = mix * lumi[:, None]
    results = (left, right)
    # rates [fb] by helicity and hemisphere (F, B), signal and all
    signal = np.array([_hemispheres(r, signal=True) for r in results]) / luminosity
    everything = np.array([_hemispheres(r, signal=False) for r in results]) / luminosity
    inverse, of_rates = [], np.zeros((4, 4))
    for side in (0, 1):
        variances = exposure @ everything[:, side]
        weighted = exposure / variances[:, None]
        information = weighted.T @ exposure
        inverse.append(np.linalg.solve(information, weighted.T))
        of_rates[side::2, side::2] = np.linalg.inv(information)
    jacobian, values = _from_rates(signal, results)
    polarisation = np.zeros((4, 4))
    for index, run in enumerate(runs):
        for change, error in _mix_changes(run):
            shift = np.zeros((2, 2))
            for side in (0, 1):
                # the events stay, the mix assumed for them changes
                wrong = lumi[index] * change @ everything[:, side]
                shift[:, side] = -inverse[side][:, index] * wrong
            effect = jacobian @ shift.ravel() * error
            polarisation += np.outer(effect, effect)
    return HelicityObservables(
        values=values,
        data_covariance=jacobian @ of_rates @ jacobian.T,
        polarisation_covariance=polarisation,
        efficiencies=(left.efficiency, right.efficiency),
    )


def _line(name: str, value: Measured, unit: str, correlations: Iterable[float]) -> str:
    """Row of the text: a value, and its correlations with the four."""
    numbers = " ".join(f"{c:+.2f}" for c in correlations)
    return f"{name:<8}{value!s:>22}{unit:<4} correlations {numbers}"


def _hemispheres(result: AsymmetryResult, *, signal: bool) -> tuple[float, float]:
    """Forward and backward sums of weights, reconstructed angle."""
    total = result.signal_sum if signal else result.selected_sum
    a = (result.reconstructed_signal if signal else result.reconstructed).value
    return 0.5 * total * (1 + a), 0.5 * total * (1 - a)


def _from_rates(
    rates: FloatArray, results: tuple[AsymmetryResult, AsymmetryResult]
) -> tuple[FloatArray, FloatArray]:
    """Jacobian of the four by (L_F, L_B, R_F, R_B), and their values."""
    jacobian, values = np.zeros((4, 4)), np.zeros(4)
    for index, result in enumerate(results):
        forward, backward = rates[index]
        total = forward + backward
        observed = (forward - backward) / total
        efficiency, slope = result.efficiency.value, result.flips.slope.value
        columns = slice(2 * index, 2 * index + 2)
        values[index] = total / efficiency
        jacobian[index, columns] = 1 / efficiency
        values[2 + index] = result.corrected(Measured(observed, 0.0)).value
        jacobian[2 + index, columns] = (np.array([1.0, -1.0]) - observed) / (
            total * slope
        )
    return jacobian, values


def _mix_changes(run: BeamRun) -> list[tuple[FloatArray, float]]:
    """Return derivatives of the mix (L, R) by each polarisation, with its error."""
    electron, positron = run.electron_polarisation, run.positron_polarisation
    return [
        (np.array([-(1 + positron), 1 - positron]) / 4, run.electron_error),
        (np.array([1 - electron, -(1 + electron)]) / 4, run.positron_error),
    ]
