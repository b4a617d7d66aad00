"""Where a source set is valid: its domain against a table of samples."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.mixing.mixed_layer import mixed_layer_pressure
from pipeline.mixing.polygons import inside as inside_polygon
from pipeline.tables import cast_groups, floats
from pipeline.usable import usable

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from pipeline.mixing.entries import Domain
    from pipeline.settings import Settings

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]

RANGES = ("pressure", "depth", "sigma0", "sigma2", "sigma4", "latitude")  # longitude has no order of its own


def validity(samples: pa.Table, valid: Domain, settings: Settings) -> tuple[BoolArray, BoolArray]:
    """Return where a domain holds and where that cannot be told, both (n_sample,).

    Parameters
    ----------
    samples
        Table of registry columns, n_sample rows.
    valid
        The domain.
    settings
        Which values may be used, and by how much density ends the mixed layer.

    """
    inside = np.ones(samples.num_rows, dtype=bool)
    unknown = np.zeros(samples.num_rows, dtype=bool)
    violated = np.zeros(samples.num_rows, dtype=bool)
    for holds, known in _conditions(samples, valid, settings):
        inside &= holds
        unknown |= ~known
        violated |= ~holds & known
    return inside, unknown & ~violated


def _conditions(
    samples: pa.Table, valid: Domain, settings: Settings
) -> Iterator[tuple[BoolArray, BoolArray]]:
    """Yield for each condition of a domain where it holds and where that is known, both (n_sample,)."""
    for name in RANGES:
        if (ends := getattr(valid, name)) is not None:
            values = usable(samples, name, settings.use)
            yield _between(values, *ends), ~np.isnan(values)
    longitude = usable(samples, "longitude", settings.use)
    if valid.longitude is not None:
        yield _between_meridians(longitude, *valid.longitude), ~np.isnan(longitude)
    if valid.region is not None:
        latitude = usable(samples, "latitude", settings.use)
        yield (
            inside_polygon(valid.region, longitude, latitude),
            ~np.isnan(longitude) & ~np.isnan(latitude),
        )
    if valid.months is not None:
        month = _months(samples)
        yield np.isin(month, valid.months), ~np.isnan(month)
    if valid.mixed_layer == "exclude":
        below = ~in_mixed_layer(samples, settings)
        yield below, np.ones(samples.num_rows, dtype=bool)


def in_mixed_layer(samples: pa.Table, settings: Settings) -> BoolArray:
    """Return which samples lie in the mixed layer of their cast, (n_sample,); not so where it is unknown."""
    pressure = usable(samples, "pressure", settings.use)
    sigma0 = usable(samples, "sigma0", settings.use)
    excess = settings.mixing.mixed_layer_density
    return np.asarray(pressure <= mixed_layer_pressure(cast_groups(samples), pressure, sigma0, excess))


def _months(samples: pa.Table) -> FloatArray:
    """Return the month of every sample, (n_sample,), of its date or else of its time; NaN if missing."""
    months = np.full(samples.num_rows, np.nan)
    for name in ("time", "date"):
        if name in samples.schema.names:
            found = floats(pa.table({name: pc.month(samples.column(name))}), name)
            months = np.where(np.isnan(found), months, found)
    return months


def _between(values: FloatArray, low: float, high: float) -> BoolArray:
    return np.asarray((values >= low) & (values <= high))


def _between_meridians(values: FloatArray, west: float, east: float) -> BoolArray:
    """Return where longitudes, in either custom of writing, lie on the way east from ``west`` to ``east``."""
    if east - west >= 360.0:
        return ~np.isnan(values)
    return np.asarray(np.mod(values - west, 360.0) <= np.mod(east - west, 360.0))
