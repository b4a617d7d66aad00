"""Values that are unusual for the region and depth in which they were measured."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.figures import unit_of
from pipeline.checking.hydrography import hydrography
from pipeline.checking.marks import Mark
from pipeline.checking.neighbours import neighbours, plausible, unlike
from pipeline.findings import Severity
from pipeline.variables import MEASURED

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.limits import RegionalRange
    from pipeline.settings import Settings
    from pipeline.usable import Rows

# Part of the usual range by which a value differs from all its neighbours where it is doubted.
_ALONE = 0.1


def regional_range(data: Rows, settings: Settings) -> list[Mark]:
    """Values outside the usual range of their region and depth, unlike the samples beside them."""
    marks = []
    left = np.ones(len(data), dtype=bool)
    for region in settings.checks.regions:
        inside = left & _inside(data, region)
        left &= ~inside
        if not inside.any():
            continue
        for name, (low, high) in region.usual.items():
            if name not in data.names or name not in MEASURED:
                continue
            values = plausible(data, name)
            with np.errstate(invalid="ignore"):
                rows = np.flatnonzero(inside & ((values < low) | (values > high)))
                if len(rows):
                    rows = rows[unlike(values[rows], neighbours(data, values, rows)) > _ALONE * (high - low)]
            if len(rows):
                words = f"is {{value}} in {region.name}, and no sample beside it is like that"
                limit = f"{low:g} to {high:g} {unit_of(name)}".rstrip()
                marks.append(
                    Mark("regional-range", Severity.DOUBT, name, rows, values[rows].tolist(), words, limit)
                )
    return marks


def _inside(data: Rows, region: RegionalRange) -> NDArray[np.bool_]:
    """Return which rows lie in a region, (n_row,); one without a position or a pressure lies in none."""
    pressure, latitude = hydrography(data).pressure, data.floats("latitude")
    west, east = region.longitude
    with np.errstate(invalid="ignore"):
        from_west = (data.floats("longitude") - west) % 360.0
        width = 360.0 if east - west >= 360.0 else (east - west) % 360.0
        return np.asarray(
            (pressure >= region.pressure[0])
            & (pressure <= region.pressure[1])
            & (latitude >= region.latitude[0])
            & (latitude <= region.latitude[1])
            & (from_west <= width)
        )
