"""What takes part of a cruise: its stations, and their good samples below the pressure from which is compared."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa

from pipeline.crossovers.neighbours import chord, unit_vectors
from pipeline.crossovers.profiles import make_profile
from pipeline.crossovers.quantities import QUANTITIES, CorrectionKind, Surface
from pipeline.tables import floats, texts
from pipeline.usable import Rows
from pipeline.variables import REGISTRY, check_name, corrected_name, flag_name

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from pipeline.crossovers.profiles import Profile
    from pipeline.crossovers.quantities import Quantity
    from pipeline.settings import Settings

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# Samples within this much of each other are one level: what the salinity's and thermometer's errors shift
# them by (0.001 kg/m3, 0.002 degC), and bottles closed at one depth (1 dbar). Our choice, no source.
RESOLUTION = {Surface.DENSITY: 0.001, Surface.TEMPERATURE: 0.002, Surface.PRESSURE: 1.0}
DAYS_PER_YEAR = 365.25
ARC_PER_MILE = 1 / 60  # degrees of a nautical mile


@dataclass(frozen=True)
class CruiseStations:
    """The stations of one cruise that have deep samples; arrays are (n_station,) unless said otherwise."""

    expocode: str
    names: tuple[str, ...]
    points: FloatArray  # on the unit sphere, (n_station, 3)
    year: FloatArray  # NaN where no date was given
    samples: tuple[IntArray, ...]  # rows of ``columns`` of every station
    columns: dict[
        str, FloatArray
    ]  # (n_sample,): surfaces, and quantities with the logarithm of proportional ones
    left_out: dict[str, int] = field(
        default_factory=dict
    )  # values measured at another temperature, by quantity
    _profiles: dict[tuple[int, str, Surface], Profile | None] = field(default_factory=dict, repr=False)

    def profile(self, station: int, quantity: Quantity, surface: Surface) -> Profile | None:
        """Return the profile of one station, None where it has none."""
        key = (station, quantity.name, surface)
        if key not in self._profiles:
            rows = self.samples[station]
            values = self.columns.get(quantity.name)
            self._profiles[key] = None if values is None else make_profile(
                _rising(self.columns[surface], surface)[rows], self.columns[Surface.PRESSURE][rows], values[rows],
                RESOLUTION[surface],
            )  # fmt: skip
        return self._profiles[key]

    def has(self, quantity: Quantity) -> bool:
        """Return whether the cruise has any value of a quantity."""
        return quantity.name in self.columns


def columns_used() -> list[str]:
    """Return the columns of samples that a comparison needs, with their flags, checks and corrections."""
    named = {q.name for q in QUANTITIES} | {*Surface} | {"latitude", "longitude"}
    named |= {q.measured_at[0] for q in QUANTITIES if q.measured_at}
    beside = {of(name) for name in named for of in (flag_name, check_name)}
    beside |= {corrected_name(q.name) for q in QUANTITIES}
    wanted = {*named, *beside, "expocode", "station", "cast", "sample", "date", "bottle_flag"}
    return [name for name in REGISTRY if name in wanted]


def as_delivered(table: pa.Table) -> pa.Table:
    """Return samples without the corrections that were made, so that what was delivered is compared."""
    corrected = [name for q in QUANTITIES if (name := corrected_name(q.name)) in table.column_names]
    return table.drop_columns(corrected)


def gather_stations(expocode: str, table: pa.Table, settings: Settings) -> CruiseStations:
    """Return the deep stations of a cruise.

    All casts of a station are one profile; where a station's number was used again more than
    ``checks.same_place`` nautical miles away, that is another station.

    Parameters
    ----------
    expocode
        The cruise.
    table
        Its samples, with the columns of ``columns_used``; corrected values stand for delivered ones, where there are.
    settings
        Which values may be used, and from which pressure on.

    """
    data = Rows(table, settings.use)
    pressure = data.usable("pressure")
    latitude, longitude = data.usable("latitude"), data.usable("longitude")
    deep = np.flatnonzero(
        (pressure >= settings.crossovers.pressure) & np.isfinite(latitude) & np.isfinite(longitude)
    )
    columns: dict[str, FloatArray] = {Surface.PRESSURE: pressure[deep]}
    for surface in (Surface.DENSITY, Surface.TEMPERATURE):
        columns[surface] = data.usable(surface)[deep]
    left_out = {}
    for quantity in QUANTITIES:
        values = data.usable(quantity.name)[deep]
        if quantity.measured_at is not None:
            column, at, within = quantity.measured_at
            elsewhere = ~(np.abs(data.usable(column)[deep] - at) <= within)
            left_out[quantity.name] = int((elsewhere & np.isfinite(values)).sum())
            values = np.where(elsewhere, np.nan, values)
        if quantity.kind is CorrectionKind.MULTIPLICATIVE:
            values = np.log(np.where(values >= quantity.least, values, np.nan))
        if np.isfinite(values).any():
            columns[quantity.name] = values
    points = unit_vectors(latitude[deep], longitude[deep])
    stations = list(_stations(texts(table, "station"), deep, points, settings.checks.same_place))
    return CruiseStations(
        expocode,
        tuple(name for name, _ in stations),
        np.array([points[rows[0]] for _, rows in stations]).reshape(len(stations), 3),
        _years(table, deep, [rows for _, rows in stations]),
        tuple(rows for _, rows in stations),
        columns,
        {name: count for name, count in left_out.items() if count},
    )


def _stations(
    names: list[str | None], deep: IntArray, points: FloatArray, same_place: float
) -> Iterator[tuple[str, IntArray]]:
    """Yield the name of every station and its samples, by name, then in the order of the table."""
    members: dict[str, list[int]] = {}
    for position, row in enumerate(deep):
        members.setdefault(names[row] or "", []).append(position)
    reach = chord(same_place * ARC_PER_MILE)
    for name, rows in sorted(members.items()):
        left = np.array(rows, dtype=np.int64)
        while len(left):
            here = np.linalg.norm(points[left] - points[left[0]], axis=1) <= reach
            yield name, left[here]
            left = left[~here]


def _years(table: pa.Table, deep: IntArray, stations: list[IntArray]) -> FloatArray:
    if "date" not in table.column_names:
        return np.full(len(stations), np.nan)
    days = floats(pa.table({"date": table.column("date").cast(pa.int32())}), "date")[deep]
    return np.array([days[rows[0]] / DAYS_PER_YEAR + 1970.0 for rows in stations])


def _rising(values: FloatArray, surface: Surface) -> FloatArray:
    """Return surfaces that rise downwards: temperature falls."""
    return -values if surface is Surface.TEMPERATURE else values
