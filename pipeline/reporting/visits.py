"""The casts of a cruise as places, and the lines they lie along: what sections and maps are drawn over."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from pipeline.reporting.line import along_line
from pipeline.reporting.wording import visible
from pipeline.tables import cast_groups, floats, texts

if TYPE_CHECKING:
    import pyarrow as pa
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]

NO_SECTION = "without a section name"
WHOLE_TRACK = "whole track"


@dataclass(frozen=True, slots=True)
class Visits:
    """Every cast of a table, n_cast of them, in the order of first appearance."""

    of_row: IntArray  # (n_row,): the cast of each row of the table
    station: tuple[str, ...]
    cast: tuple[str, ...]
    section: tuple[str, ...]
    latitude: FloatArray  # degrees, the median of its rows, as are the next ones; (n_cast,)
    longitude: FloatArray
    bottom: FloatArray  # m, NaN where unknown
    time: FloatArray  # seconds since 1970, NaN where unknown

    @property
    def names(self) -> tuple[str, ...]:
        """Station, and the cast where the station has several."""
        several = {name for name in self.station if self.station.count(name) > 1}
        return tuple(
            f"{station} cast {cast}" if station in several else station
            for station, cast in zip(self.station, self.cast, strict=True)
        )


@dataclass(frozen=True, slots=True)
class Section:
    """Casts of one section in order along it."""

    name: str
    casts: tuple[int, ...]  # numbers in ``Visits``
    distance: FloatArray  # km, (n_cast,)
    off: tuple[int, ...]  # casts that lie off it

    @property
    def length(self) -> float:
        """Kilometres from the first cast to the last."""
        return float(self.distance[-1]) if len(self.distance) else 0.0


def visits(table: pa.Table) -> Visits:
    """Return the casts of samples or CTD levels."""
    of_row = cast_groups(table)
    count = int(of_row.max()) + 1 if len(of_row) else 0
    by_cast = np.argsort(of_row, kind="stable")
    firsts = by_cast[np.searchsorted(of_row[by_cast], np.arange(count))]
    stations, sections = texts(table, "station"), texts(table, "section")
    casts = texts(table, "cast")
    return Visits(
        of_row,
        tuple(visible(stations[row] or "?") for row in firsts),
        tuple(casts[row] or "?" for row in firsts),
        tuple(visible(sections[row] or NO_SECTION) for row in firsts),
        *(_medians(values, of_row, by_cast, count) for values in _places(table)),
    )


def sections_of(found: Visits) -> tuple[Section, ...]:
    """Return the lines that casts lie along: one for each section name, in order of first appearance."""
    made = []
    names = list(dict.fromkeys(found.section))
    for name in names:
        casts = np.flatnonzero([one == name for one in found.section])
        placed = casts[np.isfinite(found.latitude[casts]) & np.isfinite(found.longitude[casts])]
        if not len(placed):
            continue
        line = along_line(found.latitude[placed], found.longitude[placed], found.time[placed])
        shown = WHOLE_TRACK if names == [NO_SECTION] else name
        order, off = placed[line.order].tolist(), placed[line.off].tolist()
        made.append(Section(shown, tuple(order), line.distance, tuple(off)))
    return tuple(made)


def _places(table: pa.Table) -> list[FloatArray]:
    seconds = np.full(table.num_rows, np.nan)
    for name in ("date", "time"):  # the time, where there is one
        if name in table.column_names:
            column = table.column(name).to_numpy().astype("datetime64[s]")
            known = ~np.isnat(column)
            seconds[known] = column[known].astype(np.int64)
    return [*(floats(table, name) for name in ("latitude", "longitude", "bottom_depth")), seconds]


def _medians(values: FloatArray, of_row: IntArray, by_cast: IntArray, count: int) -> FloatArray:
    """Return the lower median of the known values of every cast, (n_cast,): a value that was delivered."""
    groups = np.split(values[by_cast], np.searchsorted(of_row[by_cast], np.arange(1, count)))
    medians = np.full(count, np.nan)
    for number, group in enumerate(groups[:count]):
        known = np.sort(group[np.isfinite(group)])
        if len(known):
            medians[number] = known[(len(known) - 1) // 2]
    return medians
