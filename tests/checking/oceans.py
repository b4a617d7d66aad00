"""Small made-up oceans as tables, each quantity a function of cast and pressure: for faults and for look-alikes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import gsw
import numpy as np
import pyarrow as pa

from tests.invented import EXPOCODE

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from numpy.typing import NDArray

    FloatArray = NDArray[np.floating[Any]]
    Quantity = Callable[["Place"], FloatArray]


@dataclass(frozen=True)
class Place:
    """Where samples are: the number of the cast and the pressure (dbar), (n_row,) each."""

    c: FloatArray
    p: FloatArray


DEEP = (5, 25, 50, 75, 100, 150, 200, 300, 400, 500, 600, 800, 1000, 1250, 1500, 2000, 2500, 3000, 3500, 4000)
SHELF = (3, 10, 20, 30, 45, 60, 80, 100)
# Standard deviations of what is measured twice, and of each quantity.
NOISE = {
    "temperature": 0.002, "ctd_salinity": 0.001, "bottle_salinity": 0.001, "ctd_oxygen": 0.8, "bottle_oxygen": 0.8,
    "nitrate": 0.08, "phosphate": 0.01, "silicate": 0.5, "nitrite": 0.005, "dic": 1.5, "alkalinity": 1.5,
    "delta_carbon_13": 0.03, "delta_carbon_14": 3.0, "delta_oxygen_18": 0.03,
}  # fmt: skip


def _warmth(at: Place) -> FloatArray:
    return np.asarray(1.6 + 17.0 * np.exp(-at.p / 420.0) + 0.1 * np.sin(at.c) * np.exp(-at.p / 800.0))


def _salt(at: Place) -> FloatArray:
    minimum = 0.35 * np.exp(-(((at.p - 900.0) / 350.0) ** 2))
    return np.asarray(34.72 + 0.9 * np.exp(-at.p / 250.0) - minimum + 0.003 * np.sin(at.c))


def _respired(at: Place) -> FloatArray:
    return np.asarray(
        1.9 * (1.0 - np.exp(-at.p / 350.0)) * (0.75 + 0.25 * np.exp(-(((at.p - 1100.0) / 700.0) ** 2)))
    )


def _oxygen(at: Place) -> FloatArray:
    absolute = gsw.SA_from_SP(_salt(at), at.p, -20.0, -30.0)
    theta = gsw.pt0_from_t(absolute, _warmth(at), at.p)
    return np.asarray(1.01 * gsw.O2sol_SP_pt(_salt(at), theta) - 85.0 * _respired(at))


QUANTITIES: Mapping[str, Quantity] = {
    "temperature": _warmth,
    "ctd_salinity": _salt,
    "bottle_salinity": _salt,
    "ctd_oxygen": _oxygen,
    "bottle_oxygen": _oxygen,
    "nitrate": lambda at: 0.3 + 16.0 * _respired(at) + 0.0006 * at.p,
    "phosphate": lambda at: 0.12 + _respired(at) + 0.00004 * at.p,
    "silicate": lambda at: 1.0 + 12.0 * _respired(at) + 0.02 * at.p,
    "nitrite": lambda at: 0.4 * np.exp(-(((at.p - 90.0) / 40.0) ** 2)),
    "dic": lambda at: 2040.0 + 95.0 * _respired(at) + 0.008 * at.p,
    "alkalinity": lambda at: 2300.0 * _salt(at) / 35.0 + 0.02 * at.p,
    "delta_carbon_13": lambda at: 1.9 - 0.85 * _respired(at),
    "delta_carbon_14": lambda at: 60.0 - 230.0 * (1.0 - np.exp(-at.p / 900.0)),
    "delta_oxygen_18": lambda at: 0.5 * (_salt(at) - 34.7),
}


def ocean(
    n_cast: int = 10,
    levels: tuple[int, ...] = DEEP,
    changes: Mapping[str, Quantity] | None = None,
    latitude: Quantity | None = None,
    longitude: Quantity | None = None,
) -> pa.Table:
    """Return bottle samples of casts half a degree apart; ``changes`` replaces or adds quantities.

    Row ``cast * len(levels) + level`` is a sample; the noise is always the same.
    """
    cast = np.repeat(np.arange(n_cast, dtype=np.float64), len(levels))
    pressure = np.tile(np.array(levels, dtype=np.float64), n_cast)
    at, n_row = Place(cast, pressure), len(cast)
    chance = np.random.default_rng(20_260)
    columns: dict[str, object] = {
        "expocode": [EXPOCODE] * n_row,
        "station": [f"{number + 1:.0f}" for number in cast],
        "cast": pa.array([1] * n_row, type=pa.int64()),
        "sample": [str(number % len(levels) + 1) for number in range(n_row)],
        "time": pa.array(
            1_236_000_000 + (cast * 8 * 3600).astype(np.int64), type=pa.timestamp("s", tz="UTC")
        ),
        "latitude": latitude(at) if latitude else -30.0 + 0.5 * cast,
        "longitude": longitude(at) if longitude else -20.0 + 0.0 * cast,
        "bottom_depth": np.full(n_row, 1.0) * max(levels) + 60.0,
        "file": ["cruise_hy1.csv"] * n_row,
        "line": pa.array(range(4, 4 + n_row), type=pa.int64()),
        "pressure": pressure,
    }
    for name, quantity in {**QUANTITIES, **(changes or {})}.items():
        columns[name] = quantity(at) + NOISE.get(name, 0.0) * chance.standard_normal(n_row)
    return pa.table(columns)


def row(cast: int, pressure: int, levels: tuple[int, ...] = DEEP) -> int:
    """Return the row of the sample of a cast, counted from 0, at one of the levels."""
    return cast * len(levels) + levels.index(pressure)


def patch(at: Place, casts: tuple[int, int], pressures: tuple[int, int]) -> FloatArray:
    """Return 1 in a patch of the ocean that spans casts and pressures, and 0 elsewhere."""
    inside = (at.c >= casts[0]) & (at.c <= casts[1]) & (at.p >= pressures[0]) & (at.p <= pressures[1])
    return inside.astype(np.float64)
