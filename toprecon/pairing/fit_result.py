"""Result of the constrained fit: one entry per event, or per event and assignment."""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import NDArray

from toprecon.events import Observable, Status
from toprecon.kinematics import mass

FloatArray = NDArray[np.float64]

FIT_OBSERVABLES = (
    Observable("fit.chi2", "", "chi-square of the constrained fit", (0, 50), "fit χ²"),
    Observable(
        "fit.probability",
        "",
        "probability of a larger chi-square",
        (0, 1),
        "fit probability",
    ),
    Observable(
        "fit.isr_energy",
        "GeV",
        "energy of the fitted photon along the beam, 0 without",
        (0, 150),
        "fitted photon energy",
    ),
    Observable(
        "fit.top_mass",
        "GeV",
        "mean fitted mass of the two top candidates",
        (140, 210),
        "fitted top mass",
    ),
    Observable(
        "fit.cos_theta_error",
        "",
        "error of the fitted cos(theta) of the top candidate",
        (0, 0.2),
        "error of cos θ",
    ),
    Observable(
        "fit.n_iterations",
        "",
        "steps of the fit, summed over the photon hypotheses",
        (0, 60),
        "fit iterations",
    ),
)
"""Numbers per event that :meth:`FitResult.observables` gives."""


@dataclasses.dataclass(frozen=True)
class FitResult:
    """Fitted pairs; ``...`` stands for (E,) or (E, K).

    Where ``status`` is not OK all numbers but ``n_iterations`` are NaN.

    Parameters
    ----------
    status : array of uint8, shape (...)
        OK; TOO_FEW_OBJECTS: a jet or the lepton is missing or used twice; NON_FINITE:
        NaN, or no positive energy; NOT_CONVERGED.
    chi2, probability : array, shape (...)
        Chi-square, and the probability of a larger one.
    degrees_of_freedom : int
        Constraints less unmeasured quantities.
    n_iterations : array of int16, shape (...)
        Steps, summed over the photon hypotheses.
    momenta : array, shape (4, ..., 6)
        Fitted E, px, py, pz [GeV] of ``b f f`` of the top, then of the antitop; on a
        leptonic side the fermions are lepton and neutrino.
    photon : array, shape (4, ...)
        Fitted photon along the beam [GeV]; 0 where none is wanted.
    pulls : array, shape (..., 6, 3)
        Pulls of energy, polar angle, azimuth in the same order; NaN for the neutrino.
    cos_theta_error : array, shape (..., 2)
        Errors of the fitted cos(theta) of top and antitop, laboratory frame.
    leptonic_side : array of int8, shape (...)
        +1 the top decays to a lepton, -1 the antitop, 0 neither.
    """

    status: NDArray[np.uint8]
    chi2: FloatArray
    probability: FloatArray
    degrees_of_freedom: int
    n_iterations: NDArray[np.int16]
    momenta: FloatArray
    photon: FloatArray
    pulls: FloatArray
    cos_theta_error: FloatArray
    leptonic_side: NDArray[np.int8]

    @property
    def success(self) -> NDArray[np.bool_]:
        """Which fits have converged."""
        return np.asarray(self.status == Status.OK)

    @property
    def top(self) -> FloatArray:
        """Momentum of the top, shape (4, ...) [GeV]."""
        return self.momenta[..., :3].sum(axis=-1)

    @property
    def antitop(self) -> FloatArray:
        """Momentum of the antitop, shape (4, ...) [GeV]."""
        return self.momenta[..., 3:].sum(axis=-1)

    @property
    def w_plus(self) -> FloatArray:
        """Momentum of the W+, shape (4, ...) [GeV]."""
        return self.momenta[..., 1:3].sum(axis=-1)

    @property
    def w_minus(self) -> FloatArray:
        """Momentum of the W-, shape (4, ...) [GeV]."""
        return self.momenta[..., 4:].sum(axis=-1)

    @property
    def lepton(self) -> FloatArray:
        """Momentum of the lepton, shape (4, ...) [GeV]; NaN without one."""
        return self._leptonic(1)

    @property
    def neutrino(self) -> FloatArray:
        """Momentum of the neutrino, shape (4, ...) [GeV]; NaN without one."""
        return self._leptonic(2)

    def _leptonic(self, position: int) -> FloatArray:
        top, antitop = self.momenta[..., position], self.momenta[..., 3 + position]
        found = np.where(self.leptonic_side > 0, top, antitop)
        return np.where(self.leptonic_side != 0, found, np.nan)

    def lowest(self) -> NDArray[np.intp]:
        """Return the assignment with the lowest chi-square, of (E, K) fits.

        Returns
        -------
        array of int, shape (E,)
            -1 where no fit has converged.
        """
        chi2 = np.where(self.success, self.chi2, np.inf)
        if chi2.shape[1] == 0:
            return np.full(len(chi2), -1, dtype=np.intp)
        return np.where(self.success.any(axis=1), chi2.argmin(axis=1), -1)

    def take(self, which: NDArray[np.intp]) -> FitResult:
        """Return one assignment of every event.

        Parameters
        ----------
        which : array of int, shape (E,)
            Assignment, as from :meth:`lowest`; -1 takes the first one, whose status
            says why there is none.

        Returns
        -------
        FitResult
            Of shape (E,).
        """
        row, column = np.arange(len(which)), np.maximum(which, 0)
        return dataclasses.replace(
            self,
            status=self.status[row, column],
            chi2=self.chi2[row, column],
            probability=self.probability[row, column],
            n_iterations=self.n_iterations[row, column],
            momenta=self.momenta[:, row, column],
            photon=self.photon[:, row, column],
            pulls=self.pulls[row, column],
            cos_theta_error=self.cos_theta_error[row, column],
            leptonic_side=self.leptonic_side[row, column],
        )

    def observables(self) -> dict[str, FloatArray]:
        """Return the columns named by ``FIT_OBSERVABLES``, shape (...)."""
        return {
            "fit.chi2": self.chi2,
            "fit.probability": self.probability,
            "fit.isr_energy": self.photon[0],
            "fit.top_mass": 0.5 * (mass(self.top) + mass(self.antitop)),
            "fit.cos_theta_error": self.cos_theta_error[..., 0],
            "fit.n_iterations": self.n_iterations.astype(np.float64),
        }

    def counts(self) -> dict[Status, int]:
        """Return how many fits have which status."""
        numbers = np.bincount(self.status.ravel(), minlength=len(Status))
        return {status: int(numbers[status]) for status in Status}

    def __str__(self) -> str:
        """Summary in two lines."""
        counts = self.counts()
        failed = ", ".join(
            f"{n} {status.name.lower().replace('_', ' ')}"
            for status, n in counts.items()
            if n and status is not Status.OK
        )
        good = self.success
        middle = float(np.median(self.chi2[good])) if good.any() else float("nan")
        return (
            f"constrained fit: {counts[Status.OK]} of {self.status.size} converged"
            f"{'; ' + failed if failed else ''}\n"
            f"median chi2 {middle:.3g} for {self.degrees_of_freedom} degrees of freedom"
        )
