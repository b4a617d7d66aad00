"""Where a source set is valid: its domain against a table of samples."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.usable import usable

if TYPE_CHECKING:
    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.mixing.entries import Domain
    from pipeline.settings import UseSettings

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]


def validity(samples: pa.Table, valid: Domain, use: UseSettings) -> tuple[BoolArray, BoolArray]:
    """Return where a domain holds and where that cannot be told, both (n_sample,)."""
    inside = np.ones(samples.num_rows, dtype=bool)
    unknown = np.zeros(samples.num_rows, dtype=bool)
    violated = np.zeros(samples.num_rows, dtype=bool)
    for name in type(valid).model_fields:
        ends = getattr(valid, name)
        if ends is None:
            continue
        values = usable(samples, name, use)
        holds = _between_meridians(values, *ends) if name == "longitude" else _between(values, *ends)
        inside &= holds
        unknown |= np.isnan(values)
        violated |= ~holds & ~np.isnan(values)
    return inside, unknown & ~violated


def _between(values: FloatArray, low: float, high: float) -> BoolArray:
    return np.asarray((values >= low) & (values <= high))


def _between_meridians(values: FloatArray, west: float, east: float) -> BoolArray:
    """Return where longitudes, in either custom of writing, lie on the way east from ``west`` to ``east``."""
    if east - west >= 360.0:
        return ~np.isnan(values)
    return np.asarray(np.mod(values - west, 360.0) <= np.mod(east - west, 360.0))
