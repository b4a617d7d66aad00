"""Sections made up for tests: stations on the equator, where a degree is 60 nautical miles of 1.852 km."""

from __future__ import annotations

from datetime import date, timedelta
from typing import TYPE_CHECKING

import numpy as np

from pipeline import tables
from pipeline.census.section import make_section
from pipeline.census.taking import lay_out
from pipeline.settings import Settings

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.census.section import Section
    from pipeline.census.taking import Layout

    FloatArray = NDArray[np.float64]

DEGREE = 60 * 1.852  # km
EXPOCODE = "ZZV120090306"
NONE = np.zeros(0)


def samples(
    stations: Mapping[float, Sequence[float]],
    *,
    floor: float | None = None,
    changed: Mapping[str, Sequence[object]] | None = None,
) -> pa.Table:
    """Return samples of stations at these longitudes, at these depths (m); one station a day, named from 1."""
    rows = [(number, longitude, depth) for number, (longitude, depths) in enumerate(stations.items(), start=1)
            for depth in depths]  # fmt: skip
    columns: dict[str, object] = {
        "expocode": [EXPOCODE] * len(rows),
        "station": [str(number) for number, _, _ in rows],
        "cast": [1] * len(rows),
        "sample": [str(row + 1) for row in range(len(rows))],
        "date": [date(2009, 3, 5) + timedelta(days=number) for number, _, _ in rows],
        "latitude": [0.0] * len(rows),
        "longitude": [longitude for _, longitude, _ in rows],
        "depth": [float(depth) for _, _, depth in rows],
        "bottom_depth": [floor] * len(rows),
        "sigma2": [30.0 + depth / 1000 for _, _, depth in rows],
        "mixing_status": ["solved"] * len(rows),
        "tag": ["mixed"] * len(rows),
        "file": ["a_hy1.csv"] * len(rows),
        "line": [4 + row for row in range(len(rows))],
        **(changed or {}),
    }
    bare = tables.empty(()).from_pylist([{} for _ in rows])
    return tables.with_columns(bare, columns)


def section(table: pa.Table, **census: object) -> Section:
    """Return the section of a table, with other settings of the census where some are given."""
    settings = Settings.model_validate({"census": census})
    return make_section(EXPOCODE, table, "sigma2", settings)


def areas(
    table: pa.Table, shares: FloatArray, boundaries: FloatArray = NONE, **census: object
) -> tuple[FloatArray, Layout]:
    """Return the area of a source, (1 + n_class,) km2, that has these shares in the samples, (n_sample,)."""
    found = section(table, **census)
    layout = lay_out(found, boundaries)
    return found.of_samples(layout.weights) @ shares, layout
