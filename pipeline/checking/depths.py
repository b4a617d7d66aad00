"""The sea floor, and samples that would lie under it."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline import seawater
from pipeline.checking.hydrography import hydrography
from pipeline.checking.marks import Mark
from pipeline.findings import Severity
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]


def bottom_depth(data: Rows, settings: Settings) -> list[Mark]:
    """Depths of the sea floor that no ocean has, or that lie above a sample of the cast.

    The tolerance is the larger of a depth and a part of it: soundings are often not corrected for the speed
    of sound, and a ship drifts during a cast.
    """
    if "bottom_depth" not in data.names:
        return []
    floor = data.floats("bottom_depth")
    plausible = REGISTRY["bottom_depth"].plausible or (0.0, np.inf)
    marks = []
    absurd = (floor < plausible[0]) | (floor > plausible[1])
    rows = _once_a_cast(data, np.where(absurd, 1.0, -1.0))
    if len(rows):
        limit = f"{plausible[0]:g} to {plausible[1]:g} {REGISTRY['bottom_depth'].unit}"
        values = floor[rows].tolist()
        marks.append(Mark("bottom-depth", Severity.DOUBT, "bottom_depth", rows, values, "is {value}", limit))
    unknown = np.flatnonzero(floor == 0.0)
    if len(unknown):
        marks.append(
            Mark(
                "bottom-depth", Severity.NOTE, "bottom_depth", unknown, [0.0],
                f"is {{value}} in {len(unknown)} rows", "the depth of the sea floor, or a missing value", together=True,
            )
        )  # fmt: skip
    checks = settings.checks
    depth = seawater.depth(hydrography(data).pressure, data.floats("latitude"))
    judged = ~absurd & (floor > 0.0)
    excess = depth - floor - np.maximum(checks.bottom_depth, checks.bottom_share * floor)
    rows = _once_a_cast(data, np.where(judged, excess, -1.0))
    if len(rows):
        pressure = hydrography(data).pressure
        values = [
            f"{floor[i]:.0f} m, and the sample at CTDPRS {pressure[i]:g} of the cast would lie at {depth[i]:.0f} m"
            for i in rows
        ]
        limit = "a sea floor below the deepest sample"
        words = "is {value}"
        marks.append(Mark("bottom-depth", Severity.DOUBT, "bottom_depth", rows, values, words, limit))
    return marks


def _once_a_cast(data: Rows, excess: FloatArray) -> IntArray:
    """Return the row of each cast where a positive excess is largest, in the order of the table."""
    over = np.flatnonzero(excess > 0.0)
    if not len(over):
        return np.empty(0, dtype=np.int64)
    order = over[np.lexsort((over, -excess[over], data.casts[over]))]
    first = np.diff(data.casts[order], prepend=-1) != 0
    return np.sort(order[first])
