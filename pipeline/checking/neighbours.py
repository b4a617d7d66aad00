"""What stands beside a sample: above and below it in its cast, and at its pressure in the casts before and after.

A real feature of the ocean, however odd, is seen by more than one sample; a wrong value by one.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.hydrography import hydrography
from pipeline.seawater import PRESSURE
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

# In the registry's units nothing that is measured comes near this, with either sign.
_BEYOND = 1e6
ABOVE, BELOW, BETWEEN, BEFORE, AFTER = range(5)
# A cast's place on one axis of numbers: further apart than any pressure of the ocean.
_CAST_WIDTH = 1e5
# dbar, and part of the pressure, within which the end of another cast still speaks for a sample there.
_REACH, _REACH_PART = 25.0, 0.1


def plausible(data: Rows, name: str) -> FloatArray:
    """Return the values of ``name`` that may be used and lie in the registry's range, (n_row,), NaN for others.

    What lies outside is told of by another check, and must not spoil the statistics of this one.
    """
    values = data.usable(name)
    low, high = REGISTRY[name].plausible or (-_BEYOND, _BEYOND)
    with np.errstate(invalid="ignore"):
        return np.where((values >= low) & (values <= high), values, np.nan)


def neighbours(data: Rows, values: FloatArray) -> FloatArray:
    """Return what a quantity is beside each sample, (n_row, 5), NaN where there is nothing.

    The columns are the next value above in the cast, the next below, what a line between these two gives at
    the sample's pressure, and what the casts before and after (that have any value) give at that pressure.
    Rows without a value or a pressure have no neighbours and are none.

    Parameters
    ----------
    data
        Samples or CTD levels.
    values
        The quantity, (n_row,), NaN where missing.

    """
    beside = np.full((len(data), 5), np.nan)
    water = hydrography(data)
    known = ~np.isnan(values) & PRESSURE.holds(water.pressure)
    rows = water.order[known[water.order]]
    if not len(rows):
        return beside
    cast = np.cumsum(np.diff(data.casts[rows], prepend=data.casts[rows[0]]) != 0)
    pressure, value = water.pressure[rows], values[rows]
    same = cast[1:] == cast[:-1]
    found = np.full((len(rows), 5), np.nan)
    found[1:, ABOVE] = np.where(same, value[:-1], np.nan)
    found[:-1, BELOW] = np.where(same, value[1:], np.nan)
    step = np.diff(pressure)
    with np.errstate(invalid="ignore", divide="ignore"):
        part = np.where(step[:-1] + step[1:] > 0, step[:-1] / (step[:-1] + step[1:]), 0.5)
    inner = found[1:-1]
    inner[:, BETWEEN] = (1.0 - part) * inner[:, ABOVE] + part * inner[:, BELOW]
    for column, other in ((BEFORE, cast - 1), (AFTER, cast + 1)):
        found[:, column] = _at(other, cast, pressure, value)
    beside[rows] = found
    return beside


def unlike(values: FloatArray, beside: FloatArray) -> FloatArray:
    """Return how far each value is from the nearest of its neighbours, (n_row,), NaN where it has none.

    Parameters
    ----------
    values
        The quantity, (n_row,).
    beside
        Its ``neighbours``, (n_row, 5).

    """
    away = np.abs(beside - values[:, None])
    nearest = np.where(np.isnan(away), np.inf, away).min(axis=1)
    return np.where(np.isfinite(nearest), nearest, np.nan)


def _at(other: IntArray, cast: IntArray, pressure: FloatArray, value: FloatArray) -> FloatArray:
    """Return the value of another cast at each sample's pressure, (n,); samples in order of cast and pressure."""
    axis = cast * _CAST_WIDTH + pressure
    lower = np.searchsorted(axis, other * _CAST_WIDTH + pressure)
    upper = lower - 1
    lower_there = np.clip(lower, 0, len(axis) - 1)
    upper_there = np.clip(upper, 0, len(axis) - 1)
    has_lower = (lower < len(axis)) & (cast[lower_there] == other)
    has_upper = (upper >= 0) & (cast[upper_there] == other)
    below, above = pressure[lower_there], pressure[upper_there]
    span = below - above
    with np.errstate(invalid="ignore", divide="ignore"):
        part = np.where(span > 0, (pressure - above) / span, 0.5)
    line = (1.0 - part) * value[upper_there] + part * value[lower_there]
    reach = np.maximum(_REACH, _REACH_PART * pressure)
    only_lower = np.where(below - pressure <= reach, value[lower_there], np.nan)
    only_upper = np.where(pressure - above <= reach, value[upper_there], np.nan)
    one_sided = np.where(has_lower, only_lower, np.where(has_upper, only_upper, np.nan))
    return np.where(has_lower & has_upper, line, one_sided)
