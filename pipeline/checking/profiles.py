"""The levels of one quantity from the surface down, and limits that depend on the pressure."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.hydrography import hydrography

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.limits import DepthLimit
    from pipeline.settings import CheckSettings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

# What a quantity's limits are called in the settings.
LIMITED = {
    "temperature": "temperature", "ctd_salinity": "salinity", "bottle_salinity": "salinity",
    "ctd_oxygen": "oxygen", "bottle_oxygen": "oxygen", "nitrate": "nitrate", "nitrate_plus_nitrite": "nitrate",
    "phosphate": "phosphate", "silicate": "silicate", "dic": "dic", "alkalinity": "alkalinity",
}  # fmt: skip
# Beyond this many parts of the distance between two levels, their slope says nothing (our choice, no source).
FURTHEST_SLOPE = 2.0
_TOUCHING = 1e-3  # dbar; levels that are closer have no slope
_NO_OCEAN = 1e6  # in any unit; beyond it arithmetic would overflow sooner or later


@dataclass(frozen=True, slots=True)
class Ladder:
    """The levels that have a usable value of one quantity, cast after cast, from the surface down; all (n_level,)."""

    rows: IntArray
    cast: IntArray
    pressure: FloatArray  # dbar
    values: FloatArray

    def kept(self, keep: BoolArray | IntArray) -> Ladder:
        """Return the levels that ``keep`` chooses: where it is true, or those it names."""
        return Ladder(self.rows[keep], self.cast[keep], self.pressure[keep], self.values[keep])


def ladder(data: Rows, values: FloatArray) -> Ladder:
    """Return the levels of a table of n_row rows at which ``values``, (n_row,), are numbers of an ocean."""
    water = hydrography(data)
    rows = water.order[np.abs(values[water.order]) < _NO_OCEAN]
    return Ladder(rows, data.casts[rows], water.pressure[rows], values[rows])


def limit_at(limit: DepthLimit, pressure: FloatArray, checks: CheckSettings) -> FloatArray:
    """Return a limit at pressures in dbar, (n,): constant above and below, in equal ratios between."""
    span = max(checks.deep_pressure - checks.upper_pressure, 1.0)
    part = np.minimum(np.maximum((pressure - checks.upper_pressure) / span, 0.0), 1.0)
    return np.asarray(limit.upper * (limit.deep / limit.upper) ** part)


def departure(
    cast: IntArray, pressure: FloatArray, values: FloatArray, stride: int = 1, *, slopes: bool = True
) -> FloatArray:
    """Return how far each level lies outside what the levels around it allow, (n_level,), signed.

    Allowed is all between the next level above and the next below, and all up to where the slope of the two
    levels above, or of the two below, leads: a layer of the ocean that is an extremum begins before its core.
    Zero inside, and where a cast has no level on one side.

    Parameters
    ----------
    cast
        (n_level,) ascending within the table: levels of one cast stand together.
    pressure
        (n_level,) dbar, ascending within a cast.
    values
        (n_level,) the quantity; no NaN.
    stride
        How many levels away the neighbours are taken from.
    slopes
        Whether what the slopes lead to is allowed as well: without it no departure is smaller.

    """
    out = np.zeros(len(values))
    if len(values) < 2 * stride + 1:
        return out
    above, below = values[: -2 * stride], values[2 * stride :]
    here = values[stride:-stride]
    low, high = np.minimum(above, below), np.maximum(above, below)
    inside = cast[: -2 * stride] == cast[2 * stride :]
    for above_it in (True, False) if slopes else ():
        led, there = _led_to(cast, pressure, values, stride, above=above_it)
        low = np.where(there, np.minimum(low, led), low)
        high = np.where(there, np.maximum(high, led), high)
    out[stride:-stride] = np.where(inside, np.maximum(here - high, 0.0) - np.maximum(low - here, 0.0), 0.0)
    return out


def _led_to(
    cast: IntArray, pressure: FloatArray, values: FloatArray, stride: int, *, above: bool
) -> tuple[FloatArray, BoolArray]:
    """Return where the slope of the two levels above (below) leads, and where there are two, both (n_inner,)."""
    n_inner = len(values) - 2 * stride
    here = np.arange(stride, stride + n_inner)
    near = here - stride if above else here + stride
    beyond = near - stride if above else near + stride
    far = np.minimum(np.maximum(beyond, 0), len(values) - 1)
    away, apart = np.abs(pressure[here] - pressure[near]), np.abs(pressure[near] - pressure[far])
    there = (far == beyond) & (cast[far] == cast[here]) & (apart > _TOUCHING)
    ratio = np.minimum(away / np.where(there, apart, 1.0), FURTHEST_SLOPE)
    return values[near] + (values[near] - values[far]) * ratio, there
