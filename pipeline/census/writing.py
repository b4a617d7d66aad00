"""A census as a table of registry columns: a row per class and source, per class and reason, and per change."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.census.counting import Comparison
from pipeline.census.pieces import STATION_GAP
from pipeline.tables import CENSUS, empty, with_columns

if TYPE_CHECKING:
    from collections.abc import Iterator

    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.census.counting import Census

    FloatArray = NDArray[np.float64]


def class_name(row: int, boundaries: FloatArray) -> str:
    """Return what the class in a row of a census is called."""
    if row == 0:
        return "all"
    return "none" if row == len(boundaries) + 2 else str(row)


def class_limits(row: int, boundaries: FloatArray) -> tuple[float, float]:
    """Return from where a class reaches and what it stays below, NaN where it has no such end."""
    ends = np.concatenate([[np.nan], boundaries, [np.nan]])
    if row == 0 or row == len(boundaries) + 2:
        return np.nan, np.nan
    return float(ends[row - 1]), float(ends[row])


def class_rows(census: Census) -> list[int]:
    """Return the rows of a census worth telling: the whole, and classes that have any area where there are several."""
    count = len(census.boundaries) + 2
    if not len(census.boundaries):
        return [0]
    inside = [area for reason, area in census.layout.unresolved.items() if reason != STATION_GAP]
    there = census.layout.resolved + sum(inside, np.zeros(1 + count))
    return [0, *(row for row in range(1, count + 1) if row < count or there[row] > 0)]


def census_table(found: Census | Comparison) -> pa.Table:
    """Return a census, or two and what changed between them, as a table."""
    if isinstance(found, Comparison):
        rows = [*_rows(found.one), *_rows(found.other), *_changes(found)]
    else:
        rows = list(_rows(found))
    bare = empty(()).from_pylist([{} for _ in rows])
    return with_columns(bare, {name: [row.get(name) for row in rows] for name in CENSUS})


def _rows(census: Census) -> Iterator[dict[str, Any]]:
    layout, shares = census.layout, census.shares
    whole = layout.resolved + sum(layout.unresolved.values(), np.zeros(len(layout.resolved)))
    for row in class_rows(census):
        here = {"expocode": census.expocode, **_class(census, row)}
        for k, source in enumerate(census.sources):
            yield here | {
                "census_part": "source", "source": source,
                "area": float(shares.area[row, k]) if layout.has_width else None,
                "area_uncertainty": float(shares.area_uncertainty[row, k]) if layout.has_width else None,
                "area_share": float(shares.share[row, k]),
                "area_share_uncertainty": float(shares.share_uncertainty[row, k]),
            }  # fmt: skip
        for reason in sorted({*layout.unresolved, *(census.section.unresolved if row == 0 else ())}):
            area = float(layout.unresolved[reason][row]) if reason in layout.unresolved else 0.0
            yield here | {
                "census_part": "unresolved", "unresolved_reason": reason,
                "area": area if layout.has_width else None,
                "area_share": area / float(whole[row]) if whole[row] > 0 else None,
                "unresolved_samples": census.section.unresolved.get(reason) if row == 0 else None,
            }  # fmt: skip


def _changes(found: Comparison) -> Iterator[dict[str, Any]]:
    change = found.change
    for row in class_rows(found.one):
        for k, source in enumerate(found.one.sources):
            yield {
                "expocode": found.one.expocode, "other_expocode": found.other.expocode, **_class(found.one, row),
                "census_part": "change", "source": source, "area": float(found.common.resolved[0][row]),
                "area_share": float(change.before[row, k]), "other_area_share": float(change.after[row, k]),
                "area_share_change": float(change.difference[row, k]),
                "area_share_change_uncertainty": float(change.uncertainty[row, k]),
            }  # fmt: skip


def _class(census: Census, row: int) -> dict[str, Any]:
    low, high = class_limits(row, census.boundaries)
    return {
        "density_column": census.density if len(census.boundaries) else None,
        "density_class": class_name(row, census.boundaries), "density_from": low, "density_below": high,
    }  # fmt: skip
