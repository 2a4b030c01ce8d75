"""Targets and resolutions of the terms, for the collision energy of every event."""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import NDArray

from toprecon.kinematics import decay_momentum
from toprecon.pairing.names import LEPTONIC_TERMS, TermName
from toprecon.pairing.options import PairingOptions

FloatArray = NDArray[np.float64]

# Spread below and above the target of matched events at 500 GeV with jet energies known
# to 3-4 %. The lower side is wider: neutrinos in b jets, radiation out of the jets and
# along the beam. `calibrate` finds the values of other samples.
RESOLUTIONS: dict[TermName, tuple[float, float]] = {
    TermName.W_MASS: (7.5, 6.0),
    TermName.HADRONIC_TOP_MASS: (14.0, 7.0),
    TermName.TOP_ENERGY: (25.0, 6.0),
    TermName.B_MOMENTUM: (11.0, 5.0),
    TermName.B_W_ANGLE: (0.45, 0.15),
    TermName.LEPTONIC_W_MASS: (10.0, 14.0),
    TermName.LEPTONIC_TOP_MASS: (20.0, 18.0),
    TermName.LEPTONIC_TOP_ENERGY: (25.0, 8.0),
    TermName.LEPTONIC_B_MOMENTUM: (14.0, 7.0),
    TermName.LEPTONIC_B_W_ANGLE: (0.5, 0.25),
}


@dataclasses.dataclass(frozen=True)
class Term:
    """A term ready for use.

    Parameters
    ----------
    target : array, shape (E,)
        Value expected in every event.
    below, above : float
        One over the resolution on either side of the target.
    """

    target: FloatArray
    below: float
    above: float

    def of_events(self, rows: NDArray[np.int64]) -> Term:
        """Return the term for some of the events."""
        return dataclasses.replace(self, target=self.target[rows])

    def chi2(self, value: FloatArray, events: slice) -> FloatArray:
        """Return the contribution of values of some events."""
        difference = value - self.target[events]
        if self.below == self.above:
            pull = difference * self.below
        else:
            pull = difference * np.where(difference < 0.0, self.below, self.above)
        return pull * pull


def terms_of(options: PairingOptions, sqrt_s: FloatArray) -> dict[TermName, Term]:
    """Return the terms that are on, for events of some collision energies.

    Parameters
    ----------
    options : PairingOptions
        Terms and masses.
    sqrt_s : array, shape (E,)
        Collision energies [GeV].

    Returns
    -------
    dict
        Terms by name, in the order of :class:`TermName`.
    """
    result = {}
    for name in TermName:
        term = options.term(name)
        if term is None:
            continue
        usual = RESOLUTIONS[name]
        target = default_target(name, options, sqrt_s)
        if term.target is not None:
            target = np.full_like(target, term.target)
        result[name] = Term(
            target=target,
            below=1.0 / (usual[0] if term.below is None else term.below),
            above=1.0 / (usual[1] if term.above is None else term.above),
        )
    return result


def default_target(
    name: TermName, options: PairingOptions, sqrt_s: FloatArray
) -> FloatArray:
    """Return the value a term expects from masses and collision energy.

    Parameters
    ----------
    name : TermName
        Term.
    options : PairingOptions
        Masses.
    sqrt_s : array, shape (E,)
        Collision energies [GeV].

    Returns
    -------
    array, shape (E,)
        Masses; sqrt(s)/2 for a top energy; the two-body momentum for a b momentum; and
        for the b-W angle its cosine in a decay across the flight direction of the top.
    """
    if name in LEPTONIC_TERMS:
        name = _HADRONIC_PARTNER[name]
    m_t, m_w, m_b = options.top_mass, options.w_mass, options.b_mass
    energy = 0.5 * np.asarray(sqrt_s, dtype=np.float64)
    if name is TermName.TOP_ENERGY:
        return energy
    momentum = float(decay_momentum(m_t, m_w, m_b))
    if name is TermName.B_W_ANGLE:
        # transverse decay: p* across, gamma beta E* along, for b and W
        boost2 = np.maximum((energy / m_t) ** 2 - 1.0, 0.0)
        b, w = np.sqrt(momentum**2 + m_b**2), np.sqrt(momentum**2 + m_w**2)
        along_b, along_w = boost2 * b * b, boost2 * w * w
        return (np.sqrt(along_b * along_w) - momentum**2) / np.sqrt(
            (momentum**2 + along_b) * (momentum**2 + along_w)
        )
    values = {
        TermName.W_MASS: m_w,
        TermName.HADRONIC_TOP_MASS: m_t,
        TermName.B_MOMENTUM: momentum,
    }
    return np.full_like(energy, values[name])


_HADRONIC_PARTNER = {
    TermName.LEPTONIC_W_MASS: TermName.W_MASS,
    TermName.LEPTONIC_TOP_MASS: TermName.HADRONIC_TOP_MASS,
    TermName.LEPTONIC_TOP_ENERGY: TermName.TOP_ENERGY,
    TermName.LEPTONIC_B_MOMENTUM: TermName.B_MOMENTUM,
    TermName.LEPTONIC_B_W_ANGLE: TermName.B_W_ANGLE,
}
