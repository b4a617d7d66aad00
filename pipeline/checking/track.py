"""The ship's track: speed between stations, time within a cast and from cast to cast."""

from __future__ import annotations

from bisect import bisect_right
from datetime import UTC, datetime
from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.marks import Mark
from pipeline.findings import Severity

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# One minute of arc on a sphere; the definition of 1929 in metres does not matter at this precision.
_MILES_PER_DEGREE = 60.0
_SECONDS_PER_HOUR = 3600.0
_HOURS_PER_DAY = 24.0
_EXPOCODE_LENGTH = 12  # four characters of the platform, eight of the day; older ones name no day
# A cast takes time, and its one time may be its start or its end: below this, speed says nothing.
_SHORTEST_HOURS = 0.5
# Only a list of some casts, most of which follow one another in time, has an order (our choice, no source).
_FEWEST_CASTS = 5
_SHARE_OUT_OF_ORDER = 0.1


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
    miles, knots = _legs(latitude, longitude, hours, before, after)
    most = settings.checks.station_speed
    too_fast = (knots > most) & (miles > settings.checks.same_place)
    # Out to a station and back again accuses that station alone.
    direct = _legs(latitude, longitude, hours, order[:-2], order[2:])[1]
    too_fast[1:] &= ~(too_fast[:-1] & (direct <= most))
    fast = np.flatnonzero(too_fast)
    if not len(fast):
        return []
    return [
        Mark(
            "station-speed", Severity.DOUBT, "station", after[fast],
            [f"{miles[i]:.0f} nautical miles from the cast before, {knots[i]:.0f} knots" for i in fast],
            "lies {value}", f"at most {settings.checks.station_speed:g} knots between stations",
        )
    ]  # fmt: skip


def _legs(
    latitude: FloatArray, longitude: FloatArray, hours: FloatArray, start: IntArray, end: IntArray
) -> tuple[FloatArray, FloatArray]:
    """Return nautical miles and knots from rows to rows, (n_leg,) each."""
    miles = nautical_miles(latitude[start], longitude[start], latitude[end], longitude[end])
    return miles, miles / np.maximum(hours[end] - hours[start], _SHORTEST_HOURS)


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


def clock_order(data: Rows, settings: Settings) -> list[Mark]:
    """Casts whose time does not fit where they stand in the list, where the others follow one another in time."""
    hours = _hours(data)
    first = np.sort(np.unique(data.casts, return_index=True)[1])
    first = first[~np.isnan(hours[first])]
    if len(first) < _FEWEST_CASTS:
        return []
    listed = hours[first]
    kept = max((_longest_ordered(listed), _longest_ordered(-listed)), key=np.count_nonzero)
    if kept.all() or np.count_nonzero(~kept) > max(1.0, _SHARE_OUT_OF_ORDER * len(first)):
        return []  # a list in another order than that of time, or one in order
    values = []
    for i in np.flatnonzero(~kept):
        beside = [j for j in (i - 1, i + 1) if 0 <= j < len(listed)]
        other = min(beside, key=lambda j: abs(listed[j] - listed[i]))
        apart = listed[i] - listed[other]
        word = "after" if apart > 0 else "before"
        values.append(f"{abs(apart):.1f} hours {word} the {'last' if other < i else 'next'} cast")
    rows = first[~kept]
    # What the ship could not have sailed either is more than a list in another order.
    fast = np.isin(rows, [row for mark in station_speed(data, settings) for row in mark.rows.tolist()])
    words, limit = (
        "does not fit the order of the list: {value}",
        "casts in the order of time, as the others are",
    )
    return [
        Mark(
            "clock-order",
            severity,
            "time",
            rows[chosen],
            [values[i] for i in np.flatnonzero(chosen)],
            words,
            limit,
        )
        for severity, chosen in ((Severity.DOUBT, fast), (Severity.NOTE, ~fast))
        if chosen.any()
    ]


def departure_date(data: Rows, settings: Settings) -> list[Mark]:
    """Casts dated before the departure that the expocode names, or long after it."""
    hours = _hours(data)
    codes = data.table.column("expocode").combine_chunks().dictionary_encode()
    departures = np.array([_departure(code) for code in codes.dictionary.to_pylist()] or [np.nan])
    after = (hours - departures[codes.indices.fill_null(0).to_numpy()]) / _HOURS_PER_DAY
    checks = settings.checks
    wrong = (after < -checks.before_departure) | (after > checks.after_departure)
    rows = np.flatnonzero(wrong)
    rows = np.sort(rows[np.unique(data.casts[rows], return_index=True)[1]])
    if not len(rows):
        return []
    values = [f"{abs(days):.0f} days {'after' if days > 0 else 'before'}" for days in after[rows]]
    limit = f"{checks.before_departure:g} days before to {checks.after_departure:g} days after it"
    words = "lies {value} the departure that the expocode names"
    return [
        Mark("departure-date", Severity.DOUBT, "time", rows, values, words, limit, alike=True, of="casts")
    ]


def _departure(expocode: str) -> float:
    """Return the hours since 1970 of the day that ends an expocode, NaN where none does."""
    try:
        day = datetime.strptime(expocode[-8:], "%Y%m%d").replace(tzinfo=UTC)
    except ValueError:
        return np.nan
    named = len(expocode) == _EXPOCODE_LENGTH and expocode[-8:].isascii() and expocode[-8:].isdigit()
    return day.timestamp() / _SECONDS_PER_HOUR if named else np.nan


def _longest_ordered(values: FloatArray) -> NDArray[np.bool_]:
    """Return the members of one longest subsequence that never decreases, (n,), by patience sorting."""
    tails: list[float] = []
    last: list[int] = []
    before = np.full(len(values), -1)
    for i, value in enumerate(values):
        place = bisect_right(tails, float(value))
        before[i] = last[place - 1] if place else -1
        tails[place : place + 1] = [float(value)]
        last[place : place + 1] = [i]
    kept = np.zeros(len(values), dtype=bool)
    at = last[-1] if last else -1
    while at >= 0:
        kept[at] = True
        at = int(before[at])
    return kept


def _hours(data: Rows) -> FloatArray:
    """Return hours since 1970 of every row, NaN where no time of day is known, (n_row,)."""
    instants = data.table.column("time").combine_chunks().to_numpy(zero_copy_only=False)
    seconds = instants.astype("datetime64[s]").astype(np.float64)
    return np.where(np.isnat(instants), np.nan, seconds / _SECONDS_PER_HOUR)
