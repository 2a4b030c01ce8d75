"""How a corrected spectrum follows the data and the simulated sample.

Everything is per cell of the blocks of :meth:`MigrationMatrix.blocks`, so that
variances of independent cells are all that an error needs.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from toprecon.migration.matrix import MigrationMatrix
from toprecon.migration.unfolding import Method, Unfolded, UnfoldingOptions, unfold

FloatArray = NDArray[np.float64]


def response_derivatives(
    response: MigrationMatrix, data: FloatArray, options: UnfoldingOptions
) -> FloatArray:
    """Return derivatives of the corrected spectrum by every cell of the response.

    Parameters
    ----------
    response : MigrationMatrix
        The matrix used for the correction.
    data : array, shape (R,)
        Spectrum corrected.
    options : UnfoldingOptions
        Method, with a fixed strength.

    Returns
    -------
    array, shape (T, (T + 2) (R + 1))
        Central differences, cells as in :meth:`MigrationMatrix.blocks`. They include
        all that depends on the simulation: response, efficiency, fakes, background,
        and the starting point of the iterations.
    """
    block, variances = response.blocks()
    t, r = response.counts.shape
    out = np.zeros((t, *block.shape))
    # a small part of a typical row: far above rounding, far below curvature
    step = 1e-4 * response.generated.mean()
    for row, column in np.ndindex(*block.shape):
        if row >= t and column == r:
            continue
        moved = []
        for sign in (1, -1):
            changed = block.copy()
            changed[row, column] += sign * step
            matrix = MigrationMatrix.from_blocks(
                response.true_binning, response.reco_binning, changed, variances
            )
            moved.append(unfold(matrix, data, options).values)
        out[:, row, column] = (moved[0] - moved[1]) / (2 * step)
    return out.reshape(t, -1)


def simulation_covariance(
    response: MigrationMatrix,
    data: FloatArray,
    options: UnfoldingOptions | None = None,
) -> FloatArray:
    """Return the covariance of a corrected spectrum from the size of the simulation.

    Parameters
    ----------
    response : MigrationMatrix
        The matrix used for the correction.
    data : array, shape (R,)
        Spectrum corrected.
    options : UnfoldingOptions, optional
        Method; an automatic strength is chosen once and kept.

    Returns
    -------
    array, shape (T, T)
        To be added to the covariance from the data.
    """
    options = options or UnfoldingOptions()
    fixed = fixed_options(options, unfold(response, data, options))
    derivatives = response_derivatives(response, data, fixed)
    _, variances = response.blocks()
    return (derivatives * variances.ravel()) @ derivatives.T


def fixed_options(options: UnfoldingOptions, found: Unfolded) -> UnfoldingOptions:
    """Return the options with the strength that was chosen automatically."""
    if options.method is Method.TIKHONOV:
        return options.replace(strength=found.strength)
    return options


def unfold_block(
    response: MigrationMatrix,
    block: FloatArray,
    variances: FloatArray,
    options: UnfoldingOptions | None,
) -> tuple[Unfolded, UnfoldingOptions]:
    """Unfold the reconstructed spectrum of a block.

    Parameters
    ----------
    response : MigrationMatrix
        The matrix used for the correction.
    block, variances : array, shape (T + 2, R + 1)
        Sums of weights and of squared weights.
    options : UnfoldingOptions or None
        Method.

    Returns
    -------
    tuple
        The result, and the options with the strength used.
    """
    options = options or UnfoldingOptions()
    data = block[:, :-1].sum(axis=0)
    errors = variances[:, :-1].sum(axis=0)
    found = unfold(response, data, options, covariance=errors)
    return found, fixed_options(options, found)


def corrected_influence(found: Unfolded, shape: tuple[int, ...]) -> FloatArray:
    """Return the change of the corrected spectrum per unit of weight in each cell.

    Parameters
    ----------
    found : Unfolded
        A corrected spectrum.
    shape : tuple of int
        (T + 2, R + 1).

    Returns
    -------
    array, shape (T, T + 2, R + 1)
        0 for cells that are not reconstructed.
    """
    out = np.zeros((len(found.values), *shape))
    out[:, :, :-1] = found.gradient[:, None, :]
    return out


def generated_influence(shape: tuple[int, ...]) -> FloatArray:
    """Return the change of the generated spectrum per unit of weight in each cell.

    Parameters
    ----------
    shape : tuple of int
        (T + 2, R + 1).

    Returns
    -------
    array, shape (T, T + 2, R + 1)
        1 in the row of each generated bin.
    """
    t = shape[0] - 2
    out = np.zeros((t, *shape))
    for row in range(t):
        out[row, row, :] = 1.0
    return out
