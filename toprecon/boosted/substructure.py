"""All substructure of fat jets in one pass: two clusterings per jet, everything reused."""

from __future__ import annotations

import dataclasses

import numpy as np
from numpy.typing import ArrayLike, NDArray

from toprecon.boosted.correlators import energy_correlators
from toprecon.boosted.grooming import soft_drop
from toprecon.boosted.nsubjettiness import n_subjettiness
from toprecon.boosted.options import SubstructureOptions
from toprecon.boosted.subjets import splitting_scale, w_candidate
from toprecon.jets import Sequence, cluster_history
from toprecon.kinematics import mass

FloatArray = NDArray[np.float64]


@dataclasses.dataclass(frozen=True)
class Substructure:
    """What is known of F fat jets.

    Parameters
    ----------
    groomed : array, shape (4, F)
        Groomed momenta [GeV].
    w : array, shape (4, F)
        Momenta of the W candidates [GeV].
    kept : array of bool, shape (K,)
        Particles left by the grooming.
    values : dict of array, shape (F,)
        Numbers by the names of the observables, without ``boosted.``.
    """

    groomed: FloatArray
    w: FloatArray
    kept: NDArray[np.bool_]
    values: dict[str, FloatArray]


def measure(
    p4: ArrayLike, counts: ArrayLike, options: SubstructureOptions | None = None
) -> Substructure:
    """Groom fat jets and measure their substructure.

    Parameters
    ----------
    p4 : array, shape (4, K)
        Momenta of the particles, jet after jet [GeV].
    counts : array of int, shape (F,)
        Particles per jet; a jet without particles gives NaN.
    options : SubstructureOptions, optional
        Grooming and measures.

    Returns
    -------
    Substructure
        Values ``mass``, ``groomed_mass``, ``z``, ``theta``, ``tau_1`` .. ``tau_4``,
        ``tau_21``, ``tau_32``, ``tau_43``, ``c2``, ``d2``, ``sqrt_d12``, ``sqrt_d23``,
        ``sqrt_d34``, ``w_mass``, ``w_helicity``, ``n_particles``.
    """
    options = options or SubstructureOptions()
    p4 = np.asarray(p4, dtype=np.float64)
    counts = np.asarray(counts, dtype=np.int64)
    owner = np.repeat(np.arange(len(counts)), counts)
    tree = cluster_history(p4, counts, Sequence.CAMBRIDGE)
    groomed = soft_drop(
        tree, z_cut=options.z_cut, beta=options.beta, radius=options.radius
    )
    if options.on_groomed:
        inner = p4[:, groomed.kept]
        inner_counts = np.bincount(owner[groomed.kept], minlength=len(counts))
    else:
        inner, inner_counts = p4, counts
    durham = cluster_history(inner, inner_counts, Sequence.DURHAM)
    tau = {
        n: n_subjettiness(
            inner,
            inner_counts,
            n,
            beta=options.subjettiness_beta,
            radius=options.radius,
            axes=options.axes,
            history=durham,
        )
        for n in (1, 2, 3, 4)
    }
    correlators = energy_correlators(inner, inner_counts, beta=options.correlator_beta)
    _, subjets, _ = durham.split(3)
    w = w_candidate(subjets, choice=options.w_choice, w_mass=options.w_mass)
    filled = counts > 0
    whole = np.stack([np.bincount(owner, weights=c, minlength=len(counts)) for c in p4])
    values = {
        "mass": mass(whole),
        "groomed_mass": mass(groomed.p4),
        "z": groomed.z,
        "theta": groomed.theta,
        **{f"tau_{n}": value for n, value in tau.items()},
        **{f"tau_{n + 1}{n}": _ratio(tau[n + 1], tau[n]) for n in (1, 2, 3)},
        "c2": correlators.c2,
        "d2": correlators.d2,
        "sqrt_d12": splitting_scale(durham, 1),
        "sqrt_d23": splitting_scale(durham, 2),
        "sqrt_d34": splitting_scale(durham, 3),
        "w_mass": w.mass,
        "w_helicity": w.helicity,
        "n_particles": inner_counts.astype(np.float64),
    }
    values = {name: np.where(filled, value, np.nan) for name, value in values.items()}
    return Substructure(
        np.where(filled, groomed.p4, np.nan), w.p4, groomed.kept, values
    )


def _ratio(a: FloatArray, b: FloatArray) -> FloatArray:
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.where(b > 0, a / b, np.nan)
