"""Invented cruises in any number: exchange bottle files of the demonstration's ocean, 1,400 rows of 60 columns.

The same number of a cruise gives the same bytes. Every cruise works its own line of stations in its own weeks, has
its own errors of measurement, and a few values and one row that are spoiled.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from typing import TYPE_CHECKING

import numpy as np

from fixtures.ocean.chemistry import NOISE, Noise, Place, measured, true_values
from fixtures.ocean.delivery import DECIMALS, UNITS
from fixtures.ocean.section import Cruise, bottle_pressures, distances, itinerary
from fixtures.ocean.waters import respiration, sea_floor, shares

if TYPE_CHECKING:
    from pathlib import Path

    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]

ROWS = 1_400
_STATIONS, _BOTTLES = 59, 24  # the last station closes few of its bottles
_FIRST_DAY = datetime(1990, 1, 5, 6, 30, tzinfo=UTC)
_DAYS_APART = 13
_PLATFORMS = 9

_IDENTITY = ("EXPOCODE", "SECT_ID", "STNNBR", "CASTNO", "SAMPNO", "BTLNBR", "BTLNBR_FLAG_W", "DATE", "TIME",
             "LATITUDE", "LONGITUDE", "DEPTH", "CTDPRS", "CTDTMP")  # fmt: skip
# What the demonstration's ocean has beside these: unit, decimals, what it follows in the water, and by which factor.
_MORE = {
    "CFC-11": ("PMOL/KG", 3, "CFC-12", 1.9), "SF6": ("FMOL/KG", 3, "CFC-12", 0.8),
    "NH4": ("UMOL/KG", 2, "NITRIT", 0.4), "CHLORA": ("UG/KG", 3, "NITRIT", 1.1),
    "FLUOR": ("MG/M^3", 3, "NITRIT", 0.9), "REFTMP": ("DEG C", 4, "CTDTMP", 1.0),
    "CTDTURB": ("NTU", 3, "NITRIT", 0.1), "CTDPAR": ("PERCNT", 3, "NITRIT", 2.0),
}  # fmt: skip
_GASES = {
    "HELIUM": ("NMOL/KG", 4, "CTDSAL", 0.05), "NEON": ("NMOL/KG", 3, "CTDSAL", 0.2),
    "TRITUM": ("TU", 3, "CFC-12", 0.9),
}  # fmt: skip
_CORE = ("CTDSAL", "SALNTY", "CTDOXY", "OXYGEN", "SILCAT", "NITRAT", "NITRIT", "PHSPHT", "CFC-12", *_MORE)
_CARBON, _CARBON_ERROR = ("TCARBN", "ALKALI", "DELC13"), "C13ERR"
_GAS_ERROR = "TRITER"
# Columns that share the calibration of a cast: the CTD's is fitted to the bottles.
_KIN = {"CTDSAL": "S", "SALNTY": "S", "CTDOXY": "O", "OXYGEN": "O"}
_SPOILED, _BY = ("OXYGEN", "SILCAT", "NITRAT", "PHSPHT"), 1.4  # two values of each, too high by this factor
_EVERY_SECOND = frozenset({"TCARBN", "ALKALI", "CFC-11", "CFC-12", "SF6"})  # station
_EVERY_FOURTH = frozenset({"DELC13", "C13ERR", "HELIUM", "NEON", "TRITUM", "TRITER"})


@dataclass(frozen=True, slots=True)
class Inbox:
    """What was made."""

    cruises: int
    rows: int
    columns: int
    size: int  # bytes


def write_inbox(place: Path, cruises: int, carbon_every: int) -> Inbox:
    """Write the bottle files of so many cruises; every so manyeth measures carbon, the others noble gases."""
    place.mkdir(parents=True)
    size = columns = 0
    for number in range(cruises):
        name, text, columns = bottle_file(number, carbon=number % carbon_every == 0)
        (place / name).write_bytes(text)
        size += len(text)
    return Inbox(cruises, cruises * ROWS, columns, size)


def bottle_file(number: int, *, carbon: bool) -> tuple[str, bytes, int]:
    """Return the name, the bytes and the number of columns of one cruise's file."""
    start = _FIRST_DAY + timedelta(days=_DAYS_APART * number)
    expocode = f"ZZV{number % _PLATFORMS + 1}{start:%Y%m%d}"
    along = distances(_STATIONS, offset=number % 20 / 20.0)
    cruise = Cruise(expocode, "VB01", "20260401MIRVESDAT", 100 + number, itinerary(start, along))
    columns = _columns(cruise, carbon=carbon)
    lines = [
        f"BOTTLE,{cruise.stamp}",
        "# An invented ocean: these numbers were never measured",
        ",".join(columns),
        ",".join(_unit(name) for name in columns),
        *map(",".join, zip(*columns.values(), strict=True)),
        "END_DATA",
    ]
    return f"{expocode}_hy1.csv", ("\n".join(lines) + "\n").encode(), len(columns)


def _columns(cruise: Cruise, *, carbon: bool) -> dict[str, list[str]]:
    """Return the cells of a cruise by delivered name, (ROWS,) each."""
    random = np.random.default_rng([20_261_201, cruise.seed])
    levels = [bottle_pressures(cruise, station)[::-1] for station in cruise.stations]
    pressure = np.concatenate(levels)[:ROWS]
    station = np.repeat(np.arange(_STATIONS), _BOTTLES)[:ROWS]
    level = np.arange(ROWS) % _BOTTLES
    own = cruise.stations
    distance, latitude, longitude = (
        np.array([getattr(one, name) for one in own])[station]
        for name in ("distance", "latitude", "longitude")
    )
    floor = np.array([one.floor for one in own])[station]
    place = Place(distance, pressure, latitude, longitude, cruise.year)
    values = true_values(
        place, shares(distance, pressure, floor, cruise.year), respiration(distance, pressure)
    )
    calibration = {
        kin: random.standard_normal(_STATIONS) for kin in (*_KIN.values(), *NOISE, *_MORE, *_GASES)
    }
    for name, noise in NOISE.items():
        values[name] = _noisy(values[name], noise, calibration[_KIN.get(name, name)][station], random)
    for name, (_, _, like, factor) in {**_MORE, **_GASES}.items():
        true = factor * np.maximum(values[like], 0.0)
        values[name] = _noisy(true, Noise(0.002, 0.002, relative=True), calibration[name][station], random)
    for name in _SPOILED:
        values[name][random.integers(0, ROWS, 2)] *= _BY
    values[_CARBON_ERROR] = np.full(ROWS, NOISE["DELC13"].sample)
    values[_GAS_ERROR] = np.full(ROWS, 0.01)

    def of_stations(texts: list[str]) -> list[str]:
        return [texts[i] for i in station]

    columns: dict[str, list[str]] = {
        "EXPOCODE": [cruise.expocode] * ROWS,
        "SECT_ID": [cruise.section] * ROWS,
        "STNNBR": of_stations([one.number for one in own]),
        "CASTNO": ["1"] * ROWS,
        "SAMPNO": [str(_BOTTLES - i) for i in level],
        "BTLNBR": [str(100 + _BOTTLES - i) for i in level],
        "BTLNBR_FLAG_W": ["2"] * ROWS,
        "DATE": of_stations([f"{one.time:%Y%m%d}" for one in own]),
        "TIME": of_stations([f"{one.time:%H%M}" for one in own]),
        "LATITUDE": of_stations([f"{one.latitude:.4f}" for one in own]),
        "LONGITUDE": of_stations([f"{one.longitude:.4f}" for one in own]),
        "DEPTH": of_stations([f"{depth:.0f}" for depth in sea_floor(np.array([o.distance for o in own]))]),
        "CTDPRS": _numbers(pressure, 1),
        "CTDTMP": _numbers(values["CTDTMP"], DECIMALS["CTDTMP"]),
    }
    for name in (*_CORE, *(_CARBON if carbon else _GASES)):
        drawn = _drawn(name, station, level)
        flags = np.where(drawn, "2", "9")
        if name in {"SALNTY", "OXYGEN"}:
            flags[random.random(ROWS) < 0.03] = "6"  # now and then the mean of two
        columns[name] = _numbers(np.where(drawn, values[name], -999.0), _decimals(name))
        columns[f"{name}_FLAG_W"] = flags.tolist()
    error = _CARBON_ERROR if carbon else _GAS_ERROR
    columns[error] = _numbers(np.where(_drawn(error, station, level), values[error], -999.0), 2)
    columns |= {  # what only this ship knows
        "BTL_LAT": columns["LATITUDE"],
        "BTL_LON": columns["LONGITUDE"],
        "BTL_PUMP": of_stations([f"{i % 7}" for i in range(_STATIONS)]),
        "BTL_WATCH": of_stations([("early", "middle", "late")[i % 3] for i in range(_STATIONS)]),
        "BTL_NOTE": np.where(random.random(ROWS) < 0.01, "slow to close", "").tolist(),
    }
    columns["CTDPRS"][int(random.integers(ROWS))] = "-999.0"
    return columns


def _noisy(true: FloatArray, noise: Noise, cast_error: FloatArray, random: np.random.Generator) -> FloatArray:
    """Return values as instruments give them, (ROWS,), from what is shared by a cast in standard deviations."""
    shared = noise.cast * (true if noise.relative else 1.0) * cast_error
    return measured(true, noise, 0.0, random.standard_normal(ROWS)) + shared


def _drawn(name: str, station: NDArray[np.int64], level: NDArray[np.int64]) -> NDArray[np.bool_]:
    """Return which samples have a value, (ROWS,): gases and carbon are not drawn from every bottle."""
    if name in _EVERY_SECOND:
        return np.asarray(station % 2 == 0)
    if name in _EVERY_FOURTH:
        return np.asarray((station % 4 == 0) & (level % 2 == 0))
    return np.ones(ROWS, dtype=bool)


def _decimals(name: str) -> int:
    return DECIMALS[name] if name in DECIMALS else {**_MORE, **_GASES}[name][1]


def _unit(name: str) -> str:
    more = {**_MORE, **_GASES}
    return more[name][0] if name in more else {**UNITS, _GAS_ERROR: "TU"}.get(name, "")


def _numbers(values: FloatArray, decimals: int) -> list[str]:
    pattern = f"%.{decimals}f"
    return [pattern % value for value in values.tolist()]
