"""The bottles of a station as one profile: values by depth, those of one level averaged."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from pipeline.tables import FloatArray

    IntArray = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Profile:
    """Levels of a station from the top down, (n_level,) each, depths strictly increasing; at least one."""

    depth: FloatArray  # m
    value: FloatArray
    uncertainty: FloatArray


def station_groups(table: pa.Table) -> IntArray:
    """Return a number per row, (n_row,), the same for the rows of one station of one cruise, whatever the cast."""
    keys = [pc.fill_null(table.column(name).cast(pa.string()), "") for name in ("expocode", "station")]
    codes = pc.binary_join_element_wise(*keys, "\x1f").combine_chunks().dictionary_encode()
    if isinstance(codes, pa.ChunkedArray):
        codes = codes.combine_chunks()
    return np.asarray(codes.indices.to_numpy(zero_copy_only=False), dtype=np.int64)


def profiles(
    station: IntArray,
    depth: FloatArray,
    value: FloatArray,
    uncertainty: FloatArray,
    *,
    same_depth: float,
    fewest: int = 2,
) -> Iterator[tuple[int, Profile]]:
    """Yield the number and the profile of every station with enough levels.

    Parameters
    ----------
    station
        Which station each row is of, (n_row,), from 0.
    depth, value, uncertainty
        Of every row, (n_row,); a row without one of the first two is no level.
    same_depth
        m within which a bottle is at the level of the first one above; their values are averaged.
    fewest
        Levels that a profile must have.

    """
    known = np.flatnonzero(~np.isnan(depth + value))
    # Of equal depth by value, so that the order of the rows changes nothing.
    order = known[np.lexsort((uncertainty[known], value[known], depth[known], station[known]))]
    if not len(order):
        return
    starts = np.flatnonzero(np.diff(station[order], prepend=-1))
    level = _levels(depth[order], starts, same_depth)
    count = np.bincount(level)
    means = [np.bincount(level, array[order]) / count for array in (depth, value, uncertainty)]
    numbers, firsts = station[order[starts]].tolist(), level[starts].tolist()
    for number, first, end in zip(numbers, firsts, [*firsts[1:], len(count)], strict=True):
        if end - first >= fewest:
            yield number, Profile(*(mean[first:end] for mean in means))


def per_station(station: IntArray, found: dict[int, float]) -> FloatArray:
    """Return what was found of each station in all of its rows, (n_row,), NaN where nothing was."""
    of_station = np.full(int(station.max()) + 1 if len(station) else 0, np.nan)
    for number, value in found.items():
        of_station[number] = value
    return of_station[station]


def crossing(upper: tuple[float, float], lower: tuple[float, float], level: float) -> float:
    """Return the depth at which the line between two levels, (depth, value) each, has the value ``level``."""
    (z0, v0), (z1, v1) = upper, lower
    return float(z0 + (z1 - z0) * (level - v0) / (v1 - v0))


def _levels(depth: FloatArray, starts: IntArray, same_depth: float) -> IntArray:
    """Return the level of every bottle, (n,), from depths that ascend within each station, and where these start."""
    first = np.diff(depth, prepend=-np.inf) > same_depth
    first[starts] = True
    # Where bottles are close it matters which of them began the level.
    close = np.unique(np.searchsorted(starts, np.flatnonzero(~first), side="right") - 1)
    ends = np.append(starts[1:], len(depth))
    for start, end in zip(starts[close], ends[close], strict=True):
        top = depth[start]
        for i in range(start + 1, end):
            first[i] = depth[i] - top > same_depth
            if first[i]:
                top = depth[i]
    return np.asarray(np.cumsum(first) - 1, dtype=np.int64)
