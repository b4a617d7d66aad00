"""Where the stations lie: positions that were never filled in, and stations far from all others."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.marks import Mark
from pipeline.checking.track import nautical_miles
from pipeline.findings import Severity

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]

# With fewer stations nothing tells a section from what lies off it (our choice, no source).
_FEWEST_STATIONS = 5
_MOST_ASKED = 50  # where more stations stray than this, the positions are no section
# What a station's position may have been meant to be: factors of latitude and longitude, and words.
_SLIPS = (
    (1.0, -1.0, "with the other sign of longitude"),
    (-1.0, 1.0, "with the other sign of latitude"),
    (-1.0, -1.0, "with the other sign of both"),
)


def position_zero(data: Rows, settings: Settings) -> list[Mark]:
    """Stations at latitude 0 and longitude 0, where no other station is near: a position that was not filled in."""
    latitude, longitude = data.floats("latitude"), data.floats("longitude")
    at_zero = (latitude == 0.0) & (longitude == 0.0)
    if not at_zero.any():
        return []
    away = nautical_miles(latitude, longitude, np.zeros_like(latitude), np.zeros_like(latitude))
    if np.any(~at_zero & (away <= settings.checks.off_section)):
        return []
    rows = np.flatnonzero(at_zero)
    rows = rows[np.unique(data.casts[rows], return_index=True)[1]]
    return [
        Mark(
            "position-zero", Severity.DOUBT, "latitude", rows, ["0, as is LONGITUDE"] * len(rows),
            "is {value}", "the position of the station",
        )
    ]  # fmt: skip


def off_section(data: Rows, settings: Settings) -> list[Mark]:
    """Stations far from all others: a test station (a note), or a sign that was lost (a doubt)."""
    latitude, longitude = data.floats("latitude"), data.floats("longitude")
    rows = np.sort(np.unique(data.casts, return_index=True)[1])
    place = np.round(np.stack([latitude[rows], longitude[rows]]), 1)
    rows = rows[np.sort(np.unique(place, axis=1, return_index=True)[1])]  # casts of one station are one
    if len(rows) < _FEWEST_STATIONS:
        return []
    lat, lon = latitude[rows], longitude[rows]
    steps = nautical_miles(lat[:-1], lon[:-1], lat[1:], lon[1:])
    checks = settings.checks
    most = max(checks.off_section, checks.off_section_ratio * float(np.median(steps)))
    beside = np.minimum(np.append(steps, np.inf), np.append(np.inf, steps))
    marks = []
    for i in np.flatnonzero(beside > most)[:_MOST_ASKED].tolist():
        away = _nearest(lat, lon, i, lat[i], lon[i])
        if away <= most:
            continue
        slip = next(
            (
                words
                for up, along, words in _SLIPS
                if _nearest(lat, lon, i, up * lat[i], along * lon[i]) < most / 2
            ),
            None,
        )
        value = f"{away:.0f} nautical miles from any other station"
        value += f"; {slip} it would lie among them" if slip else ""
        limit = f"stations within {most:.0f} nautical miles of another"
        severity = Severity.DOUBT if slip else Severity.NOTE
        marks.append(
            Mark("off-section", severity, "station", rows[i : i + 1], [value], "lies {value}", limit)
        )
    return marks


def _nearest(latitude: FloatArray, longitude: FloatArray, own: int, north: float, east: float) -> float:
    """Return the distance from a position to the nearest station that is not the station ``own``."""
    ones = np.ones(len(latitude))
    away = nautical_miles(latitude, longitude, north * ones, east * ones)
    return float(np.delete(away, own).min())
