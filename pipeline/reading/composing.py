"""What a description makes of several columns, or of parts of one: identity, dates and times, positions."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.findings import Finding, Severity, at
from pipeline.reading import composed, remarks
from pipeline.reading.description import DATE_PARTS, POSITION_PARTS
from pipeline.reading.instants import read_instants
from pipeline.reading.positions import Axis
from pipeline.reading.spread import Spread

if TYPE_CHECKING:
    from pipeline.reading.description import ColumnEntry
    from pipeline.reading.spread import LineArray
    from pipeline.reading.workbench import Workbench

# Spreadsheets put their day zero, in 1899, 1900 or 1904, before a time of day.
_FIRST_REAL_DAY = np.datetime64("1905-01-01", "D")


def join(work: Workbench) -> None:
    """Make identity of several columns, their texts joined."""
    for quantity, columns in work.description.joined.items():
        parts = [pc.utf8_trim_whitespace(composed.as_text(work.column(column))) for column in columns]
        whole = pc.binary_join_element_wise(*parts, "_")
        nothing = pc.match_substring_regex(whole, "^_*$")
        work.add(quantity, pc.if_else(nothing, pa.scalar(""), whole), columns)


def compose_dates(work: Workbench) -> None:
    """Make date and time of day of the columns that hold them, or their parts."""
    description = work.description
    made_of = [entry.column for entry in description.columns if entry.quantity in DATE_PARTS]
    both = description.entry("date_and_time") or _time_with_date(work)
    if both is not None:
        _split(work, both)
    elif made_of:
        parts = {name: column for name in DATE_PARTS if (column := work.given(name)) is not None}
        dates, times = composed.dates_of_parts(parts, work.n_row, decimal_comma=work.decimal_comma)
        if "year" in parts:
            work.add("date", dates, made_of)
        if {"hour", "day_of_year"} & set(parts) and description.entry("time") is None:
            work.add("time", times, made_of)
    for quantity, read in (("date", composed.written_dates), ("time", composed.times_of_day)):
        entry = description.entry(quantity)
        if entry is not None and entry is not both:
            work.give(quantity, read(work.column(entry.column), entry.format), [entry.column])
    _compare_dates(work, both)
    date = description.entry("date")
    if date is not None:
        work.dates_in = (date.column, "date", "")


def _time_with_date(work: Workbench) -> ColumnEntry | None:
    """Return the column of the time of day where it holds the date too, and nothing else gives the date."""
    entry = work.description.entry("time")
    given = {variable.name for variable in work.values.values()} | set(work.constants)
    given |= {one.quantity for one in work.description.columns} | set(work.description.constants)
    if entry is None or given & {"date", "year"}:
        return None
    column = work.column(entry.column)
    dated = composed.is_dated(column)
    if not dated.any():
        return None
    example = composed.as_text(column)[int(np.argmax(dated))].as_py()
    fact = (
        f"{at(work.grid.name, work.grid.names_line)}: the column {entry.column} is said to be the time of day and holds"
        f" the date too, such as '{example[:40]}'; no other column gives the date; it was read as date_and_time"
    )
    work.findings.append(
        Finding(
            "time-with-date", Severity.NOTE, f"{fact}; say so in {work.description.place(entry.line)}.",
            variable="time", value=example[:200], limit="date_and_time", file=work.grid.name,
            line=work.grid.names_line, to_group=f"{fact}.",
        )
    )  # fmt: skip
    return entry


def _split(work: Workbench, both: ColumnEntry) -> None:
    """Give date and time of day by one column that holds both."""
    column = work.column(both.column)
    written = both.format if both.quantity == "date_and_time" else None
    dates, times = composed.split_date_and_time(column, written)
    work.add("date", dates, [both.column])
    work.add("time", times, [both.column])
    clocks = pc.filter(times, pc.not_equal(times, "")).slice(0, 1).to_pylist()
    clock = f" hh:mm{':ss' if clocks[0].count(':') > 1 else ''}" if clocks else ""
    work.dates_in = (both.column, "date_and_time", clock)
    alone = np.asarray(
        pc.and_(pc.equal(times, ""), pc.not_equal(dates, "")).to_numpy(zero_copy_only=False), dtype=bool
    )
    if not alone.any():
        return
    rows = np.flatnonzero(alone)
    rows = rows[~np.isnat(read_instants(dates.take(pa.array(rows)), pa.repeat("", len(rows))).dates)]
    if len(rows):
        text = composed.as_text(column)[int(rows[0])].as_py()
        work.findings.append(_without_time(work, both.column, text, work.grid.cells.lines[rows]))


def _without_time(work: Workbench, column: str, text: str, lines: LineArray) -> Spread:
    name = work.grid.name

    def tell(mine: LineArray) -> Finding:
        more = remarks.more_rows(len(mine) - 1, " a date alone")
        return Finding(
            "no-time-of-day", Severity.NOTE,
            f"{at(name, int(mine[0]))}: {column} is '{text[:40]}'{more}; expected date and time of day; the time of day"
            " is missing there.",
            variable="time", value=text[:200], limit="date and time of day", file=name, line=int(mine[0]),
            count=len(mine),
        )  # fmt: skip

    return Spread(lines, tell)


def _compare_dates(work: Workbench, both: ColumnEntry | None) -> None:
    """Tell where a column of times of day holds another date than the column of dates."""
    time, date = work.description.entry("time"), work.description.entry("date")
    if time is None or date is None or time is both:
        return
    blank = pa.repeat("", work.n_row)
    beside = read_instants(composed.leading_dates(work.column(time.column)), blank).dates
    given = read_instants(composed.written_dates(work.column(date.column), date.format), blank)
    if given.order is not None and not given.order.because:
        return
    differ = (
        ~np.isnat(beside) & ~np.isnat(given.dates) & (beside >= _FIRST_REAL_DAY) & (beside != given.dates)
    )
    if not differ.any():
        return
    name, row = work.grid.name, int(np.argmax(differ))

    def tell(mine: LineArray) -> Finding:
        fact = (
            f"{at(name, int(mine[0]))}: {time.column} holds the date {beside[row]}, and {date.column} says"
            f" {given.dates[row]}{remarks.more_rows(len(mine) - 1, ' they differ')}; expected one date; that of"
            f" {date.column} was taken"
        )
        return Finding(
            "date-contradicts", Severity.DOUBT, f"{fact}; ask which is right.",
            variable="date", value=str(beside[row]), limit=str(given.dates[row]), file=name, line=int(mine[0]),
            count=len(mine), to_group=f"{fact}; which is right?",
        )  # fmt: skip

    work.findings.append(Spread(work.grid.cells.lines[differ], tell))


def compose_positions(work: Workbench) -> None:
    """Make latitude and longitude of the columns that hold them, or their parts."""
    for axis in Axis:
        sides = work.given(f"{axis}_hemisphere")
        made_of = [
            entry.column
            for entry in work.description.columns
            if entry.quantity == axis
            or (entry.quantity in POSITION_PARTS and entry.quantity.startswith(axis))
        ]
        whole = work.description.entry(axis)
        parts = [work.given(f"{axis}_{part}") for part in ("degrees", "minutes", "seconds")]
        if whole is not None:
            column = work.column(whole.column)
            read = composed.degrees(column, sides, axis, decimal_comma=work.decimal_comma)
            work.give(axis, read, made_of)
            if sides is None:
                _tell_written(work, axis, whole.column, read)
        elif parts[0] is not None:
            column = composed.degrees_of_parts(parts, sides, axis, decimal_comma=work.decimal_comma)
            work.add(axis, column, made_of)


def _tell_written(work: Workbench, axis: Axis, column: str, read: pa.Array) -> None:
    """Tell of positions that were no plain numbers and were read all the same."""
    written = composed.as_text(work.column(column))
    rows = np.flatnonzero(
        np.asarray(pc.not_equal(written, composed.as_text(read)).to_numpy(zero_copy_only=False), dtype=bool)
    )
    if len(rows):
        first = int(rows[0])
        degrees = float(composed.floats_of_texts(read.slice(first, 1), decimal_comma=False)[0])
        text = written[first].as_py()
        work.findings.append(remarks.written_positions(work.grid, axis, column, rows, text, degrees))
