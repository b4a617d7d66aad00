"""Samples and stations that are named twice."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.checking.figures import label, lines, named
from pipeline.checking.marks import Mark
from pipeline.checking.track import nautical_miles
from pipeline.findings import Severity
from pipeline.tables import KEY

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

    IntArray = NDArray[np.int64]

_MOST_NAMED = 4  # columns in which two rows differ


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
    firsts = first[np.searchsorted(codes[first], codes[rows])]
    return [
        Mark(
            "duplicate-sample", Severity.DOUBT, "sample", rows, _against_the_first(data.table, rows, firsts),
            "{value}", "each sample number once in a cast",
            outcome="both rows are kept and used: take one out, or give it the number that it has",
        )
    ]  # fmt: skip


def _against_the_first(table: pa.Table, rows: IntArray, firsts: IntArray) -> list[str]:
    """Return of each repeated row its number, where that stands already, and in which columns the two differ."""
    compared = [name for name in table.column_names if name not in ("file", "line")]
    these, those = (table.take(pa.array(some)).to_pylist() for some in (rows, firsts))
    texts = []
    for this, that in zip(these, those, strict=True):
        other = lines(that["file"], that["line"], that["line"])
        where = other if this["file"] != that["file"] else other.removeprefix(f"{that['file']}, ")
        differ = [label(name) for name in compared if this[name] != that[name]]
        more = f" and {len(differ) - _MOST_NAMED} more" if len(differ) > _MOST_NAMED else ""
        how = (
            f"differ in {named(differ) if not more else ', '.join(differ[:_MOST_NAMED])}{more}"
            if differ
            else ("are the same in all columns")
        )
        texts.append(f"{this['sample']} stands already on {where} of this cast, and the two rows {how}")
    return texts


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
