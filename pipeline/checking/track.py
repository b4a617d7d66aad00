"""The ship's track: speed between stations, and time within a cast."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.marks import Mark
from pipeline.findings import Severity

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]

# One minute of arc on a sphere; the definition of 1929 in metres does not matter at this precision.
_MILES_PER_DEGREE = 60.0
_SECONDS_PER_HOUR = 3600.0
# A cast takes time, and its one time may be its start or its end: below this, speed says nothing.
_SHORTEST_HOURS = 0.5


def nautical_miles(
    latitude: FloatArray, longitude: FloatArray, other_latitude: FloatArray, other_longitude: FloatArray
) -> FloatArray:
    """Return the great-circle distance between positions in degrees, shape (n,), by the haversine formula.

    The date line is nothing to it.
    """
    lat, lon, lat2, lon2 = map(np.radians, (latitude, longitude, other_latitude, other_longitude))
    chord = np.sin((lat2 - lat) / 2) ** 2 + np.cos(lat) * np.cos(lat2) * np.sin((lon2 - lon) / 2) ** 2
    angle = 2 * np.arcsin(np.sqrt(np.clip(chord, 0.0, 1.0)))
    return np.asarray(np.degrees(angle) * _MILES_PER_DEGREE, dtype=np.float64)


def station_speed(data: Rows, settings: Settings) -> list[Mark]:
    """Casts that the ship could not have reached in time from the cast before."""
    hours = _hours(data)
    casts = data.casts
    first = np.sort(np.unique(casts, return_index=True)[1])
    first = first[~np.isnan(hours[first])]
    order = first[np.argsort(hours[first], kind="stable")]
    if len(order) < 2:
        return []
    latitude, longitude = data.floats("latitude"), data.floats("longitude")
    before, after = order[:-1], order[1:]
    miles = nautical_miles(latitude[before], longitude[before], latitude[after], longitude[after])
    between = np.maximum(hours[after] - hours[before], _SHORTEST_HOURS)
    knots = miles / between
    fast = np.flatnonzero((knots > settings.checks.station_speed) & (miles > settings.checks.same_place))
    if not len(fast):
        return []
    return [
        Mark(
            "station-speed", Severity.DOUBT, "station", after[fast],
            [f"{miles[i]:.0f} nautical miles from the cast before, {knots[i]:.0f} knots" for i in fast],
            "lies {value}", f"at most {settings.checks.station_speed:g} knots between stations",
        )
    ]  # fmt: skip


def cast_time(data: Rows, settings: Settings) -> list[Mark]:
    """Casts whose rows give more than one time."""
    hours = _hours(data)
    casts = data.casts
    n_cast = int(casts.max()) + 1 if len(casts) else 0
    low, high = np.full(n_cast, np.inf), np.full(n_cast, -np.inf)
    known = ~np.isnan(hours)
    np.minimum.at(low, casts[known], hours[known])
    np.maximum.at(high, casts[known], hours[known])
    spread = np.where(high >= low, high - low, 0.0)
    first = np.unique(casts, return_index=True)[1]
    marks = []
    most = settings.checks.cast_time
    for severity, chosen, limit in (
        (Severity.DOUBT, spread > most, f"the times of one cast within {most:g} hours"),
        (Severity.NOTE, (spread > 0) & (spread <= most), "one time for a cast"),
    ):
        if chosen.any():
            values = [f"{hour:.1f}" for hour in spread[chosen]]
            words = "changes within the cast by {value} hours"
            marks.append(Mark("cast-time", severity, "time", first[chosen], values, words, limit))
    return marks


def _hours(data: Rows) -> FloatArray:
    """Return hours since 1970 of every row, NaN where no time of day is known, (n_row,)."""
    instants = data.table.column("time").combine_chunks().to_numpy(zero_copy_only=False)
    seconds = instants.astype("datetime64[s]").astype(np.float64)
    return np.where(np.isnat(instants), np.nan, seconds / _SECONDS_PER_HOUR)
