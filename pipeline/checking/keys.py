"""Samples and stations that are named twice."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.checking.marks import Mark
from pipeline.checking.track import nautical_miles
from pipeline.findings import Severity
from pipeline.tables import KEY

if TYPE_CHECKING:
    from pipeline.settings import Settings
    from pipeline.usable import Rows


def duplicate_sample(data: Rows, settings: Settings) -> list[Mark]:
    """The same sample number twice in one cast."""
    if not data.is_bottle:
        return []
    keys = pc.binary_join_element_wise(*[data.table.column(name).cast(pa.string()) for name in KEY], "\x1f")
    known = np.asarray(pc.is_valid(keys).to_numpy(), dtype=bool)
    codes = pc.fill_null(keys, "").combine_chunks().dictionary_encode().indices.to_numpy()
    _, first = np.unique(codes, return_index=True)
    repeated = np.ones(len(data), dtype=bool)
    repeated[first] = False
    rows = np.flatnonzero(repeated & known)
    if not len(rows):
        return []
    values = data.table.column("sample").take(pa.array(rows)).to_pylist()
    return [
        Mark(
            "duplicate-sample", Severity.DOUBT, "sample", rows, values,
            "{value} stands already in this cast", "each sample number once in a cast",
        )
    ]  # fmt: skip


def repeated_station(data: Rows, settings: Settings) -> list[Mark]:
    """One station name at two places."""
    stations = data.table.column("station").combine_chunks().dictionary_encode()
    codes = stations.indices.to_numpy()
    _, first = np.unique(codes, return_index=True)
    at = first[np.searchsorted(np.unique(codes), codes)]
    latitude, longitude = data.floats("latitude"), data.floats("longitude")
    away = nautical_miles(latitude, longitude, latitude[at], longitude[at])
    far = np.flatnonzero(away > settings.checks.same_place)
    if not len(far):
        return []
    _, of_station = np.unique(codes[far], return_index=True)
    rows = far[np.sort(of_station)]
    values = [f"{away[row]:.0f}" for row in rows]
    return [
        Mark(
            "repeated-station", Severity.DOUBT, "station", rows, values,
            "is {value} nautical miles from where the same station was before",
            f"one place for one station, within {settings.checks.same_place:g} nautical miles",
        )
    ]  # fmt: skip
