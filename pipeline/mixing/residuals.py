"""The compiled residuals of a batch. Importing it loads numba; ``solution`` does so when residuals are asked for."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pipeline.mixing.compiled import compiled as _compiled

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]


@_compiled
def write_residuals(
    observed: Floats, reference: Floats, design: Floats, shares: Floats, processes: Floats, residuals: Floats
) -> None:
    """Write fitted less observed, (n_sample, n_property); NaN where either is.

    Parameters
    ----------
    observed
        (n_sample, n_property), and ``reference``, (n_property,), what is subtracted from it.
    design
        What one of each unknown adds to a deviation from the reference, (n_unknown, n_property).
    shares, processes
        The unknowns, (n_sample, n_source) and (n_sample, n_process).
    residuals
        Written.

    """
    n_source = shares.shape[1]
    for row in range(observed.shape[0]):
        for j in range(observed.shape[1]):
            residuals[row, j] = reference[j] - observed[row, j]
        for i in range(design.shape[0]):
            amount = shares[row, i] if i < n_source else processes[row, i - n_source]
            for j in range(observed.shape[1]):
                residuals[row, j] += design[i, j] * amount
