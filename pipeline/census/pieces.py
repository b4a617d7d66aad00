"""The column of water under a station, in pieces: what its samples say of every depth. Arrays in, arrays out.

A piece reaches from one depth to another. In a resolved one the shares go linearly from those of the level above
to those of the level below; what no level speaks for has a reason instead.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]
    BoolArray = NDArray[np.bool_]

DEPTH_GAP, STATION_GAP = "depth_gap", "station_gap"


@dataclass(frozen=True, eq=False)
class Levels:
    """Levels of one station, from the surface down; arrays are (n_level,)."""

    number: IntArray  # among the levels of the section
    depth: FloatArray  # m, rising
    density: FloatArray  # NaN where unknown
    reason: Sequence[str]  # why it is not resolved, "" where it is
    holds: BoolArray  # it is resolved, or what is known forbids to fill across it
    floor: float  # m, the deepest level's or below


@dataclass(frozen=True, eq=False)
class Pieces:
    """Pieces of the columns of stations, station by station from the surface down; arrays are (n_piece,)."""

    station: IntArray
    top: FloatArray  # m
    bottom: FloatArray
    upper: IntArray  # level with whose shares it begins, -1 where it is not resolved
    lower: IntArray  # and ends
    density_top: FloatArray
    density_bottom: FloatArray
    reason: NDArray[np.object_]  # "" where it is resolved

    def of(self, rows: BoolArray | IntArray) -> Pieces:
        """Return some of the pieces."""
        return Pieces(*(getattr(self, name)[rows] for name in self.__dataclass_fields__))

    @property
    def resolved(self) -> BoolArray:
        """Whether the shares are known, (n_piece,)."""
        return np.asarray(self.upper >= 0)


def pieces_of(stations: Sequence[Levels], gap: float) -> Pieces:
    """Return the columns of stations in pieces that leave no depth out and cover none twice.

    Between two resolved levels no more than ``gap`` m apart shares are linear; beyond the first and the last level,
    as far as half of it, they stay as they are. Between a resolved level and one that holds without being resolved
    either stands for its half. Levels that do not hold are filled across; where that is too far, each gives its
    reason for its part of the gap.
    """
    rows = [(k, *piece) for k, levels in enumerate(stations) for piece in _column(levels, gap)]
    columns = list(zip(*rows, strict=True)) if rows else [()] * 8
    kinds = (np.int64, np.float64, np.float64, np.int64, np.int64, np.float64, np.float64, object)
    station, *rest = (np.array(column, dtype=kind) for column, kind in zip(columns, kinds, strict=True))
    return Pieces(station, *rest)


_Piece = tuple[float, float, int, int, float, float, str]


def _column(levels: Levels, gap: float) -> Iterator[_Piece]:
    """Yield top, bottom, upper and lower level, the two densities and the reason of every piece of a column."""
    for top, bottom, upper, lower, reason in _spans(levels, gap):
        if bottom > top:
            yield top, bottom, upper, lower, _density(levels, top), _density(levels, bottom), reason


def _spans(levels: Levels, gap: float) -> Iterator[tuple[float, float, int, int, str]]:
    held = np.flatnonzero(levels.holds).tolist()
    if not held:
        yield from _gap(levels, 0.0, levels.floor)
        return
    first, last = held[0], held[-1]
    yield from _edge(levels, 0.0, float(levels.depth[first]), first, gap)
    for above, below in pairwise(held):
        top, bottom = float(levels.depth[above]), float(levels.depth[below])
        if bottom - top > gap:
            yield from _gap(levels, top, bottom)
        elif not levels.reason[above] and not levels.reason[below]:
            yield top, bottom, int(levels.number[above]), int(levels.number[below]), ""
        else:
            middle = (top + bottom) / 2
            yield top, middle, *_alone(levels, above)
            yield middle, bottom, *_alone(levels, below)
    yield from _edge(levels, float(levels.depth[last]), levels.floor, last, gap)


def _alone(levels: Levels, level: int) -> tuple[int, int, str]:
    number = -1 if levels.reason[level] else int(levels.number[level])
    return number, number, levels.reason[level]


def _edge(
    levels: Levels, top: float, bottom: float, level: int, gap: float
) -> Iterator[tuple[float, float, int, int, str]]:
    if bottom - top > gap / 2:
        yield from _gap(levels, top, bottom)
    else:
        yield top, bottom, *_alone(levels, level)


def _gap(levels: Levels, top: float, bottom: float) -> Iterator[tuple[float, float, int, int, str]]:
    """Yield what is not filled: each level in it speaks for what is nearest to it."""
    inside = [k for k in np.flatnonzero(~levels.holds).tolist() if top <= levels.depth[k] <= bottom]
    middles = [float(levels.depth[a] + levels.depth[b]) / 2 for a, b in pairwise(inside)]
    ends = [top, *middles, bottom]
    reasons = [levels.reason[k] for k in inside] or [DEPTH_GAP]
    for above, below, reason in zip(ends[:-1], ends[1:], reasons, strict=True):
        yield above, below, -1, -1, reason


def _density(levels: Levels, depth: float) -> float:
    """Return the density at a depth, linear between the levels that have one, NaN where none has."""
    known = np.isfinite(levels.density)
    if not known.any():
        return float("nan")
    return float(np.interp(depth, levels.depth[known], levels.density[known]))
