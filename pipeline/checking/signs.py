"""Positions with a wrong sign, or with latitude and longitude exchanged: told by the casts before and after."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.exchanged import exchanged_throughout
from pipeline.checking.marks import Mark
from pipeline.checking.track import nautical_miles
from pipeline.findings import Severity

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]

# Nautical miles off the line between its neighbours from which a cast is asked whether another sign would bring it
# there, and the part of this by which it has to come nearer.
_FAR, _NEARER = 100.0, 0.1
_EXCHANGED = "latitude and longitude exchanged"


def position_sign(data: Rows, settings: Settings) -> list[Mark]:
    """Casts that another sign, or latitude and longitude exchanged, would bring onto the ship's track."""
    latitude, longitude = data.floats("latitude"), data.floats("longitude")
    first = np.sort(np.unique(data.casts, return_index=True)[1])
    with np.errstate(invalid="ignore"):
        first = first[(np.abs(latitude[first]) <= 180.0) & (np.abs(longitude[first]) <= 360.0)]
    if len(first) < 3:
        return []
    if count := exchanged_throughout(data, first):
        words = (
            "and LONGITUDE seem to be exchanged: at {value} casts they name land, or a sea that is never as warm or as"
            " cold as here, and the other way about hardly anywhere"
        )
        limit = "latitude in the column of latitude"
        return [
            Mark("position-sign", Severity.DOUBT, "latitude", first, [f"{count} of {len(first)}"], words, limit,
                 together=True, of="casts")
        ]  # fmt: skip
    lat, lon = latitude[first], longitude[first]
    after = np.minimum(np.arange(len(first)) + 1, len(first) - 1)
    before = np.maximum(np.arange(len(first)) - 1, 0)
    after[0], before[-1] = 2, len(first) - 3  # the first and the last cast have two neighbours on one side
    before[0], after[-1] = 1, len(first) - 2
    away = _off(lat, lon, lat, lon, before, after)
    with np.errstate(invalid="ignore"):
        between = nautical_miles(lat[before], lon[before], lat[after], lon[after])
    # Beyond this a station is told of as lying off the section, by another check.
    checks = settings.checks
    stray = max(checks.off_section, checks.off_section_ratio * float(np.median(between)) / 2)
    turned = {
        "longitude of the other sign": ("longitude", lat, -lon),
        "latitude of the other sign": ("latitude", -lat, lon),
        _EXCHANGED: ("latitude", lon, lat),
    }
    marks = []
    told = np.zeros(len(first), dtype=bool)
    for words, (variable, other_lat, other_lon) in turned.items():
        possible = np.abs(other_lat) <= 90.0
        nearer = _off(np.where(possible, other_lat, 0.0), other_lon, lat, lon, before, after)
        found = possible & ~told & (away > _FAR) & (away > 2 * between) & (nearer < _NEARER * away)
        if words != _EXCHANGED:
            found &= away <= stray
        # Beside a cast with a wrong sign its neighbours look wrong too: the worst of a row is told.
        found &= (away >= away[before]) & (away >= away[after])
        told |= found
        rows = first[found]
        if len(rows):
            values = [f"{value:g}" for value in data.floats(variable)[rows]]
            stations = data.table.column("station").take(rows).to_pylist()
            marks += [
                Mark("position-sign", Severity.DOUBT, variable, rows[[i]], [values[i]],
                     f"is {{value}} at station {stations[i]}, {miles:.0f} nautical miles off the track; with {words} it"
                     " would lie on it",
                     "a position near those of the casts before and after")
                for i, miles in enumerate(away[found])
            ]  # fmt: skip
    return marks


def _off(
    latitude: FloatArray,
    longitude: FloatArray,
    track_latitude: FloatArray,
    track_longitude: FloatArray,
    before: NDArray[np.int64],
    after: NDArray[np.int64],
) -> FloatArray:
    """Return the nautical miles from each position to the nearer of two casts of the track, (n_cast,)."""
    return np.fmin(
        *(nautical_miles(latitude, longitude, track_latitude[i], track_longitude[i]) for i in (before, after))
    )
