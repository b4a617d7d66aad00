"""Two occupations of a section: how the part of each source in what both resolved has changed.

Only what lies under both tracks and is resolved in both takes part: along the track of the first, between the same
depths. The uncertainty is that of the difference: member by member with the same sources, so that what both have in
common cancels.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.census.areas import column_weights, intersection, linear_weights, resolved_intervals
from pipeline.census.taking import KM
from pipeline.census.track import pairs, project

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from pipeline.census.pieces import Pieces
    from pipeline.census.section import Section
    from pipeline.mixing.member_sums import MemberSums

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Common:
    """What two sections have in common; the first of every list is the first section's, classes as in ``Layout``."""

    weights: tuple[FloatArray, FloatArray]  # (1 + n_class, n_level) km2
    resolved: tuple[FloatArray, FloatArray]  # (1 + n_class,) km2; of the whole both are the same
    length: float  # km of track under which both are
    stations: tuple[int, int]  # that take part
    off: (
        float  # km, median of how far the second's stations lie off the first's track; NaN where none is near
    )


@dataclass(frozen=True, eq=False)
class Change:
    """How parts of sources have changed, second less first, (1 + n_class, n_source); NaN where there is nothing."""

    before: FloatArray
    after: FloatArray
    difference: FloatArray
    uncertainty: FloatArray
    independent: FloatArray  # what it would be if the two had no error in common

    @property
    def ratio(self) -> FloatArray:
        """Size of each change over its uncertainty, (1 + n_class, n_source); 0 where there is no change."""
        size = np.nan_to_num(np.abs(self.difference), nan=0.0)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(
                size > 0.0, np.where(self.uncertainty > 0.0, size / self.uncertainty, np.inf), 0.0
            )


@dataclass(frozen=True, eq=False)
class _Leg:
    """A leg of a section, along the track of the first."""

    start: float
    end: float
    first: int  # station at its start
    last: int


def find_common(one: Section, other: Section, boundaries: FloatArray, apart: float) -> Common:
    """Return what two sections have in common.

    Parameters
    ----------
    one, other
        The sections; distances are along the track of the first.
    boundaries
        Densities between the classes.
    apart
        Km that a station of the other may lie off the track of the first.

    """
    place, off = project(other.points, one.points, one.along, np.flatnonzero(one.filled))
    near = off <= apart
    legs = [
        _Leg(float(one.along[k]), float(one.along[k + 1]), k, k + 1)
        for k in np.flatnonzero(one.filled).tolist()
    ]
    others = [
        _Leg(float(place[a]), float(place[b]), int(a), int(b))
        for k in np.flatnonzero(other.filled)
        if near[k] and near[k + 1]
        for a, b in [(k, k + 1) if place[k] <= place[k + 1] else (k + 1, k)]
    ]
    sections, columns = (one, other), [_columns(one), _columns(other)]
    weights = tuple(np.zeros((len(boundaries) + 2, each.n_level)) for each in sections)
    heights = tuple(np.zeros(len(boundaries) + 2) for _ in sections)
    used: tuple[set[int], set[int]] = (set(), set())
    length = 0.0
    for start, end in pairs(np.unique([x for leg in (*legs, *others) for x in (leg.start, leg.end)])):
        both = [_over(each, start, end) for each in (legs, others)]
        if both[0] is None or both[1] is None:
            continue
        length += end - start
        depths = _shared(
            [columns[side][k] for side, leg in enumerate(both) if leg for k in (leg.first, leg.last)]
        )
        for side, leg in enumerate(both):
            if leg is None:  # cannot be
                continue
            used[side].update((leg.first, leg.last))
            part = np.array([(start - leg.start), (end - leg.start)]) / (leg.end - leg.start)
            ends = linear_weights(part[0], part[1])
            for station, width in zip((leg.first, leg.last), ends, strict=True):
                _add(columns[side][station], depths, boundaries, float(width) * (leg.end - leg.start) * KM,
                     weights[side], heights[side])  # fmt: skip
    first, second = (np.concatenate([each.sum(axis=0)[None], each]) for each in weights)
    whole = tuple(np.concatenate([[each.sum()], each]) for each in heights)
    taken = off[sorted(used[1])]
    return Common(
        (first, second), (whole[0], whole[1]), length, (len(used[0]), len(used[1])),
        float(np.median(taken)) if taken.size else float("nan"),
    )  # fmt: skip


def _columns(section: Section) -> list[Pieces]:
    """Return the resolved pieces of every station."""
    known = section.pieces.of(section.pieces.resolved)
    return [known.of(known.station == k) for k in range(len(section.names))]


def _over(legs: Sequence[_Leg], start: float, end: float) -> _Leg | None:
    """Return the first leg over a stretch of the track."""
    return next((leg for leg in legs if leg.start <= start and end <= leg.end), None)


def _shared(columns: Sequence[Pieces]) -> FloatArray:
    """Return the depths that are resolved at every station, (n_interval, 2)."""
    shared = resolved_intervals(columns[0])
    for column in columns[1:]:
        shared = intersection(shared, resolved_intervals(column))
    return shared


def _add(
    pieces: Pieces,
    depths: FloatArray,
    boundaries: FloatArray,
    width: float,
    weights: FloatArray,
    heights: FloatArray,
) -> None:
    """Add what the levels of a station stand for between depths, over so many km, in every class."""
    for top, bottom in depths:
        for part, level in zip(
            column_weights(pieces, boundaries, float(top), float(bottom)),
            (pieces.upper, pieces.lower),
            strict=True,
        ):
            weights += np.array([np.bincount(level, own * width, weights.shape[1]) for own in part])
            heights += part.sum(axis=1) * width


def change_of(one: MemberSums, other: MemberSums, common: Common) -> Change:
    """Return how the parts of the sources have changed from one section to the other."""
    with np.errstate(divide="ignore", invalid="ignore"):
        parts = [np.where(each > 0, 1 / each, np.nan)[:, None] for each in common.resolved]
    before, after = one.best * parts[0], other.best * parts[1]
    first, second = one.members * parts[0], other.members * parts[1]
    return Change(
        before,
        after,
        after - before,
        (second - first).std(axis=0, ddof=1),
        np.hypot(first.std(axis=0, ddof=1), second.std(axis=0, ddof=1)),
    )
