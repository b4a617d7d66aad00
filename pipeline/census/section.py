"""A cruise's samples as a section: stations in their order along the track, the column under each in pieces."""

from __future__ import annotations

import re
from collections import Counter
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa

from pipeline.census.pieces import Levels, pieces_of
from pipeline.census.track import KM_PER_RADIAN, leg_lengths, track_order
from pipeline.crossovers.neighbours import unit_vectors
from pipeline.mixing.status import MixingStatus
from pipeline.mixing.tags import Tag
from pipeline.tables import floats, texts

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.census.pieces import Pieces
    from pipeline.settings import Settings

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]
    BoolArray = NDArray[np.bool_]

UNPLACED, UNASKED = "no_depth", "no_sources"
# What is known of such a sample forbids to fill across it: it is of other waters.
_HOLDING = frozenset({MixingStatus.OUTSIDE.label, Tag.UNEXPLAINED.value})
_RESOLVED = ""
_SECONDS_PER_DAY = 86_400.0
_SECONDS = pa.timestamp("s", tz="UTC")  # a Parquet file may hold finer ones


@dataclass(frozen=True, eq=False)
class Section:
    """A cruise as a section; stations are in their order along the track."""

    expocode: str
    names: tuple[str, ...]  # of the stations
    latitude: FloatArray  # (n_station,)
    longitude: FloatArray
    along: FloatArray  # km from the first station
    filled: BoolArray  # (n_station - 1,) whether the leg to the next station is short enough
    floor: FloatArray  # (n_station,) m, depth of the sea floor, or of the deepest sample where that is deeper
    pieces: Pieces
    level_of: IntArray  # (n_sample,) level that a resolved sample is of, -1 for all others
    n_level: int
    unresolved: Mapping[str, int]  # samples by reason
    without_floor: int  # stations that no depth of the sea floor is given for
    year: float  # NaN where no date is given

    @property
    def n_resolved(self) -> int:
        """Samples whose shares count."""
        return int((self.level_of >= 0).sum())

    @property
    def lengths(self) -> FloatArray:
        """Km from each station to the next, (n_station - 1,)."""
        return np.diff(self.along)

    @property
    def points(self) -> FloatArray:
        """The stations on the unit sphere, (n_station, 3)."""
        return unit_vectors(self.latitude, self.longitude)

    def of_samples(self, levels: FloatArray) -> FloatArray:
        """Return weights of samples, (n, n_sample), from those of levels, (n, n_level): equal parts of a level's."""
        there = self.level_of >= 0
        count = np.bincount(self.level_of[there], minlength=self.n_level)
        weights = np.zeros((len(levels), len(self.level_of)))
        weights[:, there] = (levels / np.maximum(count, 1))[:, self.level_of[there]]
        return weights


def make_section(expocode: str, samples: pa.Table, density_name: str, settings: Settings) -> Section:
    """Return the section that a cruise's samples make; the order of the rows does not show in a bit of it.

    Parameters
    ----------
    expocode
        The cruise.
    samples
        Its samples, n_sample rows.
    density_name
        The column by which the section may be divided.
    settings
        Its census, and how far a station may reach.

    """
    depth = floats(samples, "depth")
    latitude, longitude = floats(samples, "latitude"), floats(samples, "longitude")
    reasons = _reasons(samples)
    placed = np.isfinite(depth) & np.isfinite(latitude) & np.isfinite(longitude)
    depth = np.maximum(depth, 0.0)
    rank = _ranks(samples)
    stations = _stations(samples, placed, latitude, longitude, rank, settings.checks.same_place)
    first = np.array([rows[0] for _, rows in stations], dtype=np.int64)
    instants = _instants(samples)
    instant = np.array([_least(instants[rows]) for _, rows in stations])
    order = track_order(latitude[first], longitude[first], instant) if len(first) else first
    stations = [stations[k] for k in order]
    first = first[order]
    lengths = leg_lengths(latitude[first], longitude[first])
    density, bottom = floats(samples, density_name), floats(samples, "bottom_depth")
    levels, level_of = [], np.full(samples.num_rows, -1)
    n_level = 0
    for _, rows in stations:
        made, own = _levels(rows, depth, density, bottom, reasons, n_level)
        levels.append(made)
        level_of[rows] = np.where(reasons[rows] == _RESOLVED, own, -1)
        n_level += len(made.depth)
    counts = Counter(reason or UNPLACED for reason in np.where(placed, reasons, UNPLACED) if reason)
    return Section(
        expocode,
        tuple(name for name, _ in stations),
        latitude[first],
        longitude[first],
        np.concatenate([[0.0], np.cumsum(lengths)])[: len(first)],
        lengths <= settings.census.station_gap,
        np.array([one.floor for one in levels]),
        pieces_of(levels, settings.census.depth_gap),
        level_of,
        n_level,
        dict(sorted(counts.items())),
        sum(not np.isfinite(bottom[rows]).any() for _, rows in stations),
        float(1970.0 + _least(instant) / _SECONDS_PER_DAY / 365.25),
    )


def _reasons(samples: pa.Table) -> NDArray[np.object_]:
    """Return why each sample is not resolved, (n_sample,), blank where it is."""
    status, tag = texts(samples, "mixing_status"), texts(samples, "tag")
    solved = MixingStatus.SOLVED.label
    return np.array(
        [
            UNASKED if one is None else one if one != solved
            else Tag.UNEXPLAINED.value if own == Tag.UNEXPLAINED else _RESOLVED
            for one, own in zip(status, tag, strict=True)
        ],
        dtype=object,
    )  # fmt: skip


def in_order(samples: pa.Table) -> pa.Table:
    """Return samples in one order, whatever order they came in, so that sums over them are the same to the last bit."""
    return samples.take(pa.array(np.argsort(_ranks(samples))))


def _ranks(samples: pa.Table) -> IntArray:
    """Return the place of each row among all, (n_row,), by what tells rows apart: never by where it stands."""
    keys = [texts(samples, name) for name in ("station", "cast", "sample", "file")]
    lines = floats(samples, "line")
    order = sorted(range(samples.num_rows), key=lambda row: (*((key[row] or "") for key in keys), lines[row]))
    rank = np.empty(samples.num_rows, dtype=np.int64)
    rank[order] = np.arange(len(order))
    return rank


def _stations(
    samples: pa.Table,
    placed: BoolArray,
    latitude: FloatArray,
    longitude: FloatArray,
    rank: IntArray,
    same_place: float,
) -> list[tuple[str, IntArray]]:
    """Return the stations by name, each with its rows by rank; a name used again elsewhere is another station."""
    named = texts(samples, "station")
    members: dict[str, list[int]] = {}
    for row in np.argsort(rank):
        if placed[row]:
            members.setdefault(named[row] or "", []).append(int(row))
    points = unit_vectors(latitude, longitude)
    reach = np.radians(same_place / 60)
    found = []
    for name in sorted(members, key=_natural):
        left = np.array(members[name], dtype=np.int64)
        while left.size:
            here = np.linalg.norm(points[left] - points[left[0]], axis=1) <= reach
            found.append((name, left[here]))
            left = left[~here]
    return found


def _natural(name: str) -> tuple[tuple[int, str], ...]:
    """Return a key by which station 9 comes before 10."""
    parts = re.findall(r"[0-9]+|[^0-9]+", name)
    return tuple((int(part), "") if part.isascii() and part.isdigit() else (-1, part) for part in parts)


def _instants(samples: pa.Table) -> FloatArray:
    """Return seconds since 1970, (n_row,): of the time, else of the date's noon."""
    seconds = np.full(samples.num_rows, np.nan)
    if "date" in samples.column_names:
        days = pa.table({"date": samples.column("date").cast(pa.int32())})
        seconds = (floats(days, "date") + 0.5) * _SECONDS_PER_DAY
    if "time" in samples.column_names:
        given = floats(pa.table({"time": samples.column("time").cast(_SECONDS).cast(pa.int64())}), "time")
        seconds = np.where(np.isfinite(given), given, seconds)
    return seconds


def _least(values: FloatArray) -> float:
    known = values[np.isfinite(values)]
    return float(known.min()) if known.size else float("nan")


def _levels(
    rows: IntArray,
    depth: FloatArray,
    density: FloatArray,
    bottom: FloatArray,
    reasons: NDArray[np.object_],
    number: int,
) -> tuple[Levels, IntArray]:
    """Return the levels of a station, numbered from ``number``, and which one each of its rows is of, (n_row,).

    A level has all samples of one depth; one resolved among them is enough.
    """
    at, own = np.unique(depth[rows], return_inverse=True)
    own = own.reshape(-1)
    densities, why, holds = np.full(len(at), np.nan), [], np.zeros(len(at), dtype=bool)
    for level in range(len(at)):
        here = rows[own == level]
        known = density[here][np.isfinite(density[here])]
        if known.size:
            densities[level] = known.mean()
        said = list(reasons[here])
        reason = _RESOLVED if _RESOLVED in said else _first(said)
        why.append(reason)
        holds[level] = reason in {_RESOLVED, *_HOLDING}
    floors = bottom[rows][np.isfinite(bottom[rows])]
    floor = max(float(at[-1]), float(floors[0]) if floors.size else 0.0)
    return Levels(number + np.arange(len(at)), at, densities, why, holds, floor), number + own


def _first(reasons: Sequence[str]) -> str:
    """Return the reason that holds a level, of several the first by name."""
    return min(reasons, key=lambda reason: (reason not in _HOLDING, reason))


def separation(one: FloatArray, other: FloatArray) -> float:
    """Return the distance of two points of the unit sphere, km."""
    return float(KM_PER_RADIAN * 2 * np.arcsin(min(1.0, float(np.linalg.norm(one - other)) / 2)))
