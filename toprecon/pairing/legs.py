"""Quantities of one side of an event, from Minkowski products.

Every term follows from energies and products of momenta: with W = q + q,
b.W = d_bq + d_bq, m_t^2 = m_b^2 + m_W^2 + 2 b.W, and the b momentum in the rest frame
of the top is sqrt((b.W)^2 - m_b^2 m_W^2)/m_t. No boost and no sum of four-vectors is
needed. Clamps guard rounding in nearly massless or collinear systems.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Container, Iterator

import numpy as np
from numpy.typing import NDArray

from toprecon.pairing.names import HADRONIC_TERMS, LEPTONIC_TERMS, TermName

FloatArray = NDArray[np.float64]

TINY = 1e-12  # GeV^2 or GeV; stands in for 0 in denominators of degenerate systems


@dataclasses.dataclass(frozen=True)
class System:
    """A jet, or a W candidate: what its products with others leave out.

    Parameters
    ----------
    energy, mass2, momentum : array, shape (E,)
        Energy [GeV], mass squared [GeV^2] and size of the momentum [GeV].
    """

    energy: FloatArray
    mass2: FloatArray
    momentum: FloatArray


def system(energy: FloatArray, mass2: FloatArray) -> System:
    """Return a system from its energy and mass squared (negative ones count as 0)."""
    mass2 = np.maximum(mass2, 0.0)
    return System(energy, mass2, np.sqrt(np.maximum(energy * energy - mass2, 0.0)))


@dataclasses.dataclass(frozen=True)
class Side:
    """Names of the terms of a hadronic or leptonic side."""

    w_mass: TermName
    mass: TermName
    energy: TermName
    momentum: TermName
    angle: TermName


HADRONIC = Side(*HADRONIC_TERMS)
LEPTONIC = Side(*LEPTONIC_TERMS)


@dataclasses.dataclass(frozen=True)
class Leg:
    """A b jet with a W candidate.

    Parameters
    ----------
    b, w : System
        The two.
    product : array, shape (E,)
        Their Minkowski product b.W [GeV^2].
    side : Side
        Names of its terms.
    """

    b: System
    w: System
    product: FloatArray
    side: Side

    def values(
        self, wanted: Container[TermName]
    ) -> Iterator[tuple[TermName, FloatArray]]:
        """Yield the quantities wanted, by name; that of the W alone is not among them."""
        side = self.side
        if side.mass in wanted or side.momentum in wanted:
            mass = self.top_mass()
            if side.mass in wanted:
                yield side.mass, mass
            if side.momentum in wanted:
                yield side.momentum, self.b_momentum(mass)
        if side.energy in wanted:
            yield side.energy, self.b.energy + self.w.energy
        if side.angle in wanted:
            yield side.angle, self.b_w_cosine()

    def top_mass(self) -> FloatArray:
        """Return the mass of b + W [GeV]."""
        square = self.b.mass2 + self.w.mass2 + 2.0 * self.product
        return np.sqrt(np.maximum(square, 0.0))

    def b_momentum(self, mass: FloatArray) -> FloatArray:
        """Return the b momentum in the rest frame of b + W, of that mass [GeV]."""
        square = self.product * self.product - self.b.mass2 * self.w.mass2
        return np.sqrt(np.maximum(square, 0.0)) / np.maximum(mass, TINY)

    def b_w_cosine(self) -> FloatArray:
        """Return the cosine of the laboratory angle between b and W."""
        size = np.maximum(self.b.momentum * self.w.momentum, TINY)
        cosine = (self.b.energy * self.w.energy - self.product) / size
        return np.minimum(np.maximum(cosine, -1.0), 1.0)
