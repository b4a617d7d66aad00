"""The pressure levels of a cast."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.marks import Mark
from pipeline.findings import Severity

if TYPE_CHECKING:
    from pipeline.settings import Settings
    from pipeline.usable import Rows


def duplicate_pressure(data: Rows, settings: Settings) -> list[Mark]:
    """CTD levels whose pressure stands already in the cast. Bottles may share a pressure."""
    if data.is_bottle:
        return []
    pressure, casts = data.floats("pressure"), data.casts
    order = np.lexsort((np.arange(len(casts)), pressure, casts))
    same = (np.diff(casts[order]) == 0) & (pressure[order][1:] == pressure[order][:-1])
    rows = np.sort(order[1:][same])
    if not len(rows):
        return []
    return [
        Mark(
            "duplicate-pressure", Severity.DOUBT, "pressure", rows, pressure[rows].tolist(),
            "is {value} a second time in the cast", "each level once",
        )
    ]  # fmt: skip


def pressure_order(data: Rows, settings: Settings) -> list[Mark]:
    """CTD casts whose pressure does not go one way. The order is kept as delivered."""
    if data.is_bottle:
        return []
    pressure, casts = data.floats("pressure"), data.casts
    within = np.diff(casts) == 0
    upwards, downwards = pressure[1:] < pressure[:-1], pressure[1:] > pressure[:-1]
    n_cast = int(casts.max()) + 1 if len(casts) else 0
    up = np.bincount(casts[1:][within & upwards], minlength=n_cast)
    down = np.bincount(casts[1:][within & downwards], minlength=n_cast)
    mixed = np.flatnonzero((up > 0) & (down > 0))
    if not len(mixed):
        return []
    turning = within & np.where(down[casts[1:]] >= up[casts[1:]], upwards, downwards)
    rows = np.array([1 + np.flatnonzero(turning & (casts[1:] == cast))[0] for cast in mixed])
    return [
        Mark(
            "pressure-order", Severity.NOTE, "pressure", rows, pressure[rows].tolist(),
            "turns back at {value} dbar", "pressure that goes one way through a cast",
        )
    ]  # fmt: skip
