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


def neighbours(data: Rows, values: FloatArray, wanted: IntArray | None = None) -> FloatArray:
    """Return what a quantity is beside each sample, (n_row, 5) or (n_wanted, 5), NaN where there is nothing.

    The columns are the next value above in the cast, the next below, what a line between these two gives at
    the sample's pressure, and what the casts before and after (that have any value) give at that pressure.
    Rows without a value or a pressure have no neighbours and are none.

    Parameters
    ----------
    data
        Samples or CTD levels.
    values
        The quantity, (n_row,), NaN where missing.
    wanted
        The rows to tell of, (n_wanted,); all by default.

    """
    n_row = len(data)
    beside = np.full((n_row if wanted is None else len(wanted), 5), np.nan)
    rows = _levels(data, values)
    if not len(rows) or not len(beside):
        return beside
    place = np.full(n_row, -1)  # on the axis of all levels that have a value
    place[rows] = np.arange(len(rows))
    place = place if wanted is None else place[wanted]
    at = place[place >= 0]
    cast = np.cumsum(np.diff(data.casts[rows], prepend=data.casts[rows[0]]) != 0)
    pressure, value = hydrography(data).pressure[rows], values[rows]
    found = np.full((len(at), 5), np.nan)
    found[:, ABOVE], found[:, BELOW] = _next_to(at, cast, value)
    up, down = np.maximum(at - 1, 0), np.minimum(at + 1, len(rows) - 1)
    to_here, from_here = pressure[at] - pressure[up], pressure[down] - pressure[at]
    with np.errstate(invalid="ignore", divide="ignore"):
        part = np.where(to_here + from_here > 0, to_here / (to_here + from_here), 0.5)
    found[:, BETWEEN] = (1.0 - part) * found[:, ABOVE] + part * found[:, BELOW]
    for column, step in ((BEFORE, -1), (AFTER, 1)):
        found[:, column] = _in_cast(cast[at] + step, pressure[at], cast, pressure, value)
    beside[place >= 0] = found
    return beside


def above_and_below(data: Rows, values: FloatArray) -> FloatArray:
    """Return the first two of the neighbours of each sample, (n_row, 2)."""
    beside = np.full((len(data), 2), np.nan)
    rows = _levels(data, values)
    if len(rows):
        beside[rows] = np.column_stack(_next_to(np.arange(len(rows)), data.casts[rows], values[rows]))
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


def _levels(data: Rows, values: FloatArray) -> IntArray:
    """Return the rows that have a value and a pressure, cast after cast, from the surface down, (n_level,)."""
    water = hydrography(data)
    known = ~np.isnan(values) & PRESSURE.holds(water.pressure)
    return np.asarray(water.order[known[water.order]])


def _next_to(at: IntArray, cast: IntArray, value: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the values above and below some levels in their casts, (n_at,) each, from all levels, (n_level,)."""
    up, down = np.maximum(at - 1, 0), np.minimum(at + 1, len(cast) - 1)
    above = np.where((at > up) & (cast[up] == cast[at]), value[up], np.nan)
    below = np.where((at < down) & (cast[down] == cast[at]), value[down], np.nan)
    return above, below


def _in_cast(
    other: IntArray, depth: FloatArray, cast: IntArray, pressure: FloatArray, value: FloatArray
) -> FloatArray:
    """Return the values of other casts at some pressures, (n_at,), from all levels in order, (n_level,)."""
    axis = cast * _CAST_WIDTH + pressure
    lower = np.searchsorted(axis, other * _CAST_WIDTH + depth)
    upper = lower - 1
    lower_there = np.minimum(lower, len(axis) - 1)
    upper_there = np.maximum(upper, 0)
    has_lower = (lower < len(axis)) & (cast[lower_there] == other)
    has_upper = (upper >= 0) & (cast[upper_there] == other)
    below, above = pressure[lower_there], pressure[upper_there]
    span = below - above
    with np.errstate(invalid="ignore", divide="ignore"):
        part = np.where(span > 0, (depth - above) / span, 0.5)
    line = (1.0 - part) * value[upper_there] + part * value[lower_there]
    reach = np.maximum(_REACH, _REACH_PART * depth)
    only_lower = np.where(below - depth <= reach, value[lower_there], np.nan)
    only_upper = np.where(depth - above <= reach, value[upper_there], np.nan)
    one_sided = np.where(has_lower, only_lower, np.where(has_upper, only_upper, np.nan))
    return np.where(has_lower & has_upper, line, one_sided)
