"""The compiled distances from the mixing hull. Importing it loads numba; ``hull`` does so at its first use."""

from __future__ import annotations

from math import sqrt
from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.mixing.compiled import compiled as _compiled

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Ints = NDArray[np.integer[Any]]


@_compiled
def write_distances(
    observed: Floats, rows: Ints, columns: Ints, reference: Floats, matrix: Floats, constant: Floats, bit: Ints,
    spread: Floats, design: Floats, shares: Floats, processes: Floats, distance: Floats, side: Ints,
) -> None:  # fmt: skip
    """Write how far the fits of samples ``rows``, with bounds and without, are apart, and on which side.

    Parameters
    ----------
    observed
        (n_sample, n_property), of which the properties ``columns``, (n_used,), are there.
    reference
        What is subtracted from an observed value, (n_property,).
    matrix, constant, spread
        The map from deviations to the unknowns without bounds, (n_unknown, n_used) and (n_unknown,), and
        their standard uncertainties, (n_unknown,).
    bit
        (n_unknown,) zero for an unknown that has no bound.
    design
        What one of each unknown adds to a property, in standard uncertainties, (n_unknown, n_used).
    shares, processes
        The unknowns with bounds, (n_sample, n_source) and (n_sample, n_process).
    distance, side
        Written: (n_sample,) each.

    """
    n_source, n_used = shares.shape[1], columns.size
    moved = np.empty(n_used)
    for row in rows:
        moved[:] = 0.0
        lowest = np.inf
        for i in range(bit.size):
            value = constant[i]
            for j in range(n_used):
                value += matrix[i, j] * (observed[row, columns[j]] - reference[columns[j]])
            if bit[i] and spread[i] > 0.0 and value < lowest * spread[i]:
                lowest = value / spread[i]
                side[row] = i
            bounded = shares[row, i] if i < n_source else processes[row, i - n_source]
            for j in range(n_used):
                moved[j] += design[i, j] * (bounded - value)
        total = 0.0
        for j in range(n_used):
            total += moved[j] ** 2
        distance[row] = sqrt(total)
