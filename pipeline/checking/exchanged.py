"""Latitude and longitude exchanged throughout a cruise: told by land, and by how warm the surface can be where."""

from __future__ import annotations

from typing import TYPE_CHECKING

import gsw
import numpy as np

from pipeline.checking.hydrography import hydrography

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

_SURFACE = 20.0  # dbar
# The coldest and the warmest that the surface of the sea gets, degC, by degrees of latitude, north or south
# (from memory of upwelling, shelves in winter and enclosed seas in summer; common practice, no source).
_LATITUDES = (0.0, 10.0, 20.0, 25.0, 30.0, 40.0, 50.0, 60.0, 65.0, 70.0, 80.0, 90.0)
_COLDEST = (16.0, 13.0, 11.0, 9.0, 4.0, -2.0, -2.0, -2.5, -2.5, -2.5, -2.5, -2.5)
_WARMEST = (35.0, 35.0, 36.0, 36.0, 36.0, 31.0, 26.0, 23.0, 21.0, 15.0, 9.0, 6.0)
# The atlas of salinity anomalies of TEOS-10 knows no sea in these: from south, to north, from west, to east.
_SEAS_WITHOUT = ((12.0, 31.0, 32.0, 44.0), (40.0, 48.0, 27.0, 55.0), (36.0, 40.0, 48.0, 55.0), (23.0, 31.0, 47.0, 57.0),
                 (53.0, 66.0, 9.0, 31.0), (41.0, 49.0, -93.0, -76.0))  # fmt: skip
_DEPTH = 1000.0  # dbar at which the atlas is asked
# Parts of the casts that lie where no sea is or can be as it is, as delivered and exchanged; and the fewest casts.
_MOST, _HARDLY_ANY, _FEWEST = 0.6, 0.02, 3


def exchanged_throughout(data: Rows, first: IntArray) -> int:
    """Return in how many of some casts the sea cannot be where they lie, 0 unless exchanging brings nearly all to sea.

    Parameters
    ----------
    data
        Samples or CTD levels.
    first
        A row of each cast, (n_cast,), with a position.

    """
    if len(first) < _FEWEST:
        return 0
    latitude, longitude = data.floats("latitude")[first], data.floats("longitude")[first]
    if np.any(np.abs(longitude) > 90.0):
        return 0
    warmth = _surface(data)[data.casts[first]]
    wrong = _impossible(latitude, longitude, warmth)
    if wrong.mean() < _MOST or _impossible(longitude, latitude, warmth).mean() > _HARDLY_ANY:
        return 0
    return int(wrong.sum())


def _surface(data: Rows) -> FloatArray:
    """Return the temperature of the uppermost level of each cast, (n_cast,), NaN where none is near the surface."""
    water = hydrography(data)
    found = np.full(int(data.casts.max(initial=-1)) + 1, np.nan)
    starts = water.order[water.starts]
    with np.errstate(invalid="ignore"):
        upper = starts[water.pressure[starts] <= _SURFACE]
    found[data.casts[upper]] = water.temperature[upper]
    return found


def _impossible(latitude: FloatArray, longitude: FloatArray, warmth: FloatArray) -> BoolArray:
    """Return where positions lie on land, or the surface is warmer or colder than the sea gets there, (n_cast,)."""
    around = np.abs(latitude)
    with np.errstate(invalid="ignore"):
        climate = (warmth < np.interp(around, _LATITUDES, _COLDEST)) | (
            warmth > np.interp(around, _LATITUDES, _WARMEST)
        )
    return np.asarray(climate | _on_land(latitude, longitude))


def _on_land(latitude: FloatArray, longitude: FloatArray) -> BoolArray:
    """Return where the atlas of TEOS-10 has no sea within its four degrees, (n_cast,).

    There Absolute Salinity is Reference Salinity to the last bit (IOC, SCOR and IAPSO 2010, appendix A.5).
    """
    salinity = np.full(len(latitude), 35.0)
    anomaly = gsw.SA_from_SP(salinity, _DEPTH, longitude, latitude) - gsw.SR_from_SP(salinity)
    land = anomaly == 0.0
    for south, north, west, east in _SEAS_WITHOUT:
        land &= ~((latitude >= south) & (latitude <= north) & (longitude >= west) & (longitude <= east))
    return np.asarray(land)
