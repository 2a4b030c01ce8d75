"""Cross sections of the backgrounds, per helicity of the beams."""

from __future__ import annotations

import functools
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.events import Helicity, Sample
from toprecon.generation.options import GenerationOptions, Process
from toprecon.generation.shower import background_generator
from toprecon.treelevel import ElectroweakInputs
from toprecon.treelevel.couplings import propagator_ratio

FloatArray = NDArray[np.float64]

COLLISIONS = 4000  # tried to find a cross section: about 1 % of statistical error
# sigma(e-L e+R), sigma(e-R e+L) in fb at 500 GeV: arXiv:1307.8102, table of signal and
# background, from memory; used for their ratio only
PUBLISHED_PER_HELICITY = {Process.WW: (26000.0, 150.0), Process.ZZ: (1106.0, 582.0)}
_UP, _DOWN = (2 / 3, 0.5), (-1 / 3, -0.5)  # charge, weak isospin
_QUARKS = {Process.BB: (_DOWN,), Process.QQ: (_DOWN, _UP, _DOWN, _UP)}


def describe_background(options: GenerationOptions, n: int) -> Sample:
    """Return the description of a background sample.

    Parameters
    ----------
    options : GenerationOptions
        Process and energy.
    n : int
        Collisions tried, before the preselection.

    Returns
    -------
    Sample
        The unpolarised cross section is Pythia's, for beams with radiation. It is
        divided between the helicities: quark pairs by tree level at their masses,
        pairs of bosons like the published values at 500 GeV.
    """
    unpolarised, left_share = background_cross_section(
        options.process, options.sqrt_s, options.minimum_sqrt_s_prime
    )
    return Sample(
        name=options.sample_name,
        process=options.process.value,
        helicity=Helicity.MIXED,
        sqrt_s=options.sqrt_s,
        cross_section_lr=4 * unpolarised * left_share,
        cross_section_rl=4 * unpolarised * (1 - left_share),
        cross_section=unpolarised,
        generated=n,
        entries=n,
        sum_of_weights=float(n),
    )


@functools.lru_cache(maxsize=16)
def background_cross_section(
    process: Process, sqrt_s: float, minimum_mass: float = 0.0
) -> tuple[float, float]:
    """Return the cross section for unpolarised beams, and the share of e-L e+R.

    Parameters
    ----------
    process : Process
        A background.
    sqrt_s : float
        Collision energy [GeV].
    minimum_mass : float
        Smallest mass of what is produced [GeV].

    Returns
    -------
    tuple of float
        Cross section [fb] as Pythia integrates it, and the share. The same numbers on
        every call: a fixed seed and :data:`COLLISIONS` collisions.
    """
    pythia = background_generator(process, sqrt_s, minimum_mass, hadrons=False)
    pythia.rndm.init(1)
    masses = [
        float(pythia.infoPython().mHat()) for _ in range(COLLISIONS) if pythia.next()
    ]
    value = float(pythia.infoPython().sigmaGen()) * 1e12  # mb to fb
    background_generator.cache_clear()  # its statistics are used up
    if process in PUBLISHED_PER_HELICITY:
        left, right = PUBLISHED_PER_HELICITY[process]
        return value, left / (left + right)
    return value, float(np.mean(left_handed_share(process, np.array(masses))))


def left_handed_share(
    process: Process, mass: Any, inputs: ElectroweakInputs | None = None
) -> FloatArray:
    """Return sigma(e-L e+R) over the sum of both helicities for quark pairs.

    Parameters
    ----------
    process : Process
        ``bb`` or ``qq``.
    mass : array
        Mass of the pair [GeV].
    inputs : ElectroweakInputs, optional
        Couplings.

    Returns
    -------
    array
        Tree level, massless quarks.
    """
    inputs = inputs or ElectroweakInputs()
    s2 = inputs.sin2_theta
    propagator = propagator_ratio(mass, inputs) / (s2 * (1 - s2))
    sums = []
    for electron in (s2 - 0.5, s2):
        total = np.zeros(np.shape(mass))
        for charge, isospin in _QUARKS[process]:
            for coupling in (isospin - charge * s2, -charge * s2):
                total += np.abs(-charge + electron * coupling * propagator) ** 2
        sums.append(total)
    return sums[0] / (sums[0] + sums[1])
