"""Invented cruises over an invented deep ocean that does not change, with errors that are known."""

from __future__ import annotations

from datetime import date
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa

from pipeline import seawater
from pipeline.crossovers import CruiseStations, gather_stations
from pipeline.settings import Settings
from pipeline.tables import with_columns
from pipeline.usable import Rows

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]

SETTINGS = Settings()
# Standard deviations of measurement: shared by a cast, of each sample; parts of the value where so marked.
NOISE = {
    "bottle_salinity": (0.0015, 0.001), "bottle_oxygen": (0.004, 0.003), "nitrate": (0.008, 0.006),
    "phosphate": (0.008, 0.006), "silicate": (0.008, 0.006), "dic": (1.0, 1.5), "alkalinity": (1.0, 1.5),
    "ph_total": (0.002, 0.002), "delta_carbon_13": (0.01, 0.03),
}  # fmt: skip
PROPORTIONAL = {"bottle_oxygen", "nitrate", "phosphate", "silicate"}
SECTION = tuple((-30.0 + 0.5 * k, -20.0) for k in range(6))  # latitude, longitude


def ocean(pressure: FloatArray) -> dict[str, FloatArray]:
    """Return what the water holds at pressures, (n,): smooth, and denser downwards."""
    depth = (pressure - 1500.0) / 3500.0
    return {
        "temperature": 3.6 - 2.6 * depth + 0.3 * depth**2,
        "bottle_salinity": 34.60 + 0.22 * depth - 0.09 * depth**2,
        "bottle_oxygen": 190.0 + 70.0 * depth - 20.0 * depth**2,
        "nitrate": 33.0 - 4.0 * depth + depth**2,
        "phosphate": 2.30 - 0.30 * depth + 0.1 * depth**2,
        "silicate": 60.0 + 90.0 * depth - 25.0 * depth**2,
        "dic": 2230.0 + 40.0 * depth,
        "alkalinity": 2330.0 + 50.0 * depth,
        "ph_total": 7.60 + 0.02 * depth,
        "delta_carbon_13": 0.30 + 0.15 * depth,
    }


def samples(
    expocode: str,
    seed: int,
    *,
    stations: Sequence[tuple[float, float]] = SECTION,
    bottles: int = 10,
    pressures: tuple[float, float] = (1000.0, 4800.0),
    added: Mapping[str, float] | None = None,
    factor: Mapping[str, float] | None = None,
    noise: float = 1.0,
    year: int = 2009,
    quantities: Sequence[str] = tuple(NOISE),
) -> pa.Table:
    """Return the samples of a cruise as the archive has them, in so far as crossovers need them.

    Parameters
    ----------
    expocode, seed
        Name, and where its random numbers come from.
    stations
        Latitude and longitude of each.
    bottles, pressures
        How many a station has, and between which pressures, dbar.
    added, factor
        By how much the cruise is off, by quantity.
    noise
        How much of ``NOISE`` there is.
    year, quantities
        When, and what was measured.

    """
    random = np.random.default_rng([20_263, seed])
    parts = []
    for number, (latitude, longitude) in enumerate(stations, start=1):
        spread = (pressures[1] - pressures[0]) / bottles
        pressure = np.linspace(*pressures, bottles) + random.uniform(-0.3, 0.3, bottles) * spread
        true = ocean(pressure)
        columns: dict[str, object] = {
            "expocode": [expocode] * bottles, "station": [str(number)] * bottles, "cast": [1] * bottles,
            "sample": [str(k) for k in range(bottles)], "date": [date(year, 3, 1)] * bottles,
            "latitude": np.full(bottles, latitude), "longitude": np.full(bottles, longitude),
            "pressure": pressure, "temperature": true["temperature"],
        }  # fmt: skip
        for name in quantities:
            size = true[name] if name in PROPORTIONAL else np.ones(bottles)
            of_cast, of_sample = NOISE[name]
            error = of_cast * random.standard_normal() + of_sample * random.standard_normal(bottles)
            value = true[name] + noise * size * error
            columns[name] = value * (factor or {}).get(name, 1.0) + (added or {}).get(name, 0.0)
            columns[f"{name}_flag"] = np.full(bottles, 2)
        if "ph_total" in quantities:
            columns["ph_temperature"] = np.full(bottles, 25.0)
        columns["practical_salinity"] = columns.get("bottle_salinity", true["bottle_salinity"])
        table = with_columns(pa.table({"row": np.arange(bottles)}), columns)
        described = seawater.columns(table, Rows(table, SETTINGS.use).usable)
        chosen = {name: described[name] for name in ("sigma4", "potential_temperature")}
        parts.append(with_columns(table, chosen))
    return pa.concat_tables(parts)


def cruise(expocode: str, seed: int, settings: Settings = SETTINGS, **how: Any) -> CruiseStations:
    """Return the deep stations of an invented cruise."""
    return gather_stations(expocode, samples(expocode, seed, **how), settings)
