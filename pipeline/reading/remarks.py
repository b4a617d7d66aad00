"""What of the rows of a file could not be read, or was read in a way worth knowing, in words."""

from __future__ import annotations

import re
from functools import partial
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.findings import Finding, Severity, at
from pipeline.reading.columns import Use
from pipeline.reading.instants import date_format
from pipeline.reading.spread import Spread
from pipeline.reading.values import delivered_column
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from numpy.typing import NDArray

    from pipeline.reading.grid import Grid
    from pipeline.reading.instants import DateOrder
    from pipeline.reading.positions import Axis
    from pipeline.reading.spread import LineArray
    from pipeline.reading.values import Unconverted, Unreadable

    BoolArray = NDArray[np.bool_]
    Where = Sequence[tuple[str, int, str | None]]  # station, cast and sample of every row

# Beyond this many cells a column's unreadable values are told in one sentence.
_MOST_CELLS_TOLD = 50
_COMMA_NUMBER = re.compile(r"[+-]?\d*,\d+([eE][+-]?\d+)?$")


def has_comma(text: str) -> bool:
    """Return whether a text is a number but for a comma in it."""
    return _COMMA_NUMBER.match(text.strip()) is not None


def comma_remedy(grid: Grid) -> str:
    """Return what is to be done where commas are decimal signs, "" where no description can say so."""
    return (
        f'write decimal = "," in {grid.described_in}, if the comma is the decimal sign'
        if grid.described_in
        else ""
    )


def more_rows(count: int, words: str = "") -> str:
    """Return in words that the same stands in ``count`` rows more."""
    return f" (and in {count} more {'row' if count == 1 else 'rows'}{words})" if count else ""


def unreadable(grid: Grid, cells: Unreadable, where: Where) -> list[Finding | Spread]:
    """Tell the cells of one column that hold no number, so many at most one by one.

    Parameters
    ----------
    grid
        The file.
    cells
        The cells.
    where
        Station, cast and sample of each row.

    """
    column, name = cells.column, grid.name
    variable = column.variable.name if column.variable else column.name
    lines = grid.cells.lines[cells.rows]
    is_flag = column.use is Use.FLAG
    commas = np.array([not is_flag and has_comma(text) for text in cells.texts], dtype=bool)
    told: list[Finding | Spread] = []
    if commas.any():
        text = cells.texts[int(np.argmax(commas))]
        told.append(
            Spread(
                lines[commas], partial(_commas, name, comma_remedy(grid), column.delivered, variable, text)
            )
        )
    check, wanted = ("unknown-flag", "a flag of one digit") if is_flag else ("not-a-number", "a number")
    others = np.flatnonzero(~commas)
    for one in others[:_MOST_CELLS_TOLD].tolist():
        station, cast, sample = where[int(cells.rows[one])]
        line, text = int(lines[one]), cells.texts[one]
        told.append(
            Finding(
                check, Severity.FAULT,
                f"{at(name, line)}: {column.delivered} is '{text[:40]}'; expected {wanted}; it counts as missing.",
                variable=variable, value=text[:200], limit=wanted, file=name, line=line,
                station=station, cast=cast, sample=sample,
            )
        )  # fmt: skip
    if len(others) > _MOST_CELLS_TOLD:
        rest = lines[others[_MOST_CELLS_TOLD:]]
        told.append(Spread(rest, partial(_more_unreadable, name, check, wanted, column.delivered, variable)))
    return told


def _more_unreadable(
    name: str, check: str, wanted: str, column: str, variable: str, lines: LineArray
) -> Finding:
    what = "cell" if len(lines) == 1 else "cells"
    return Finding(
        check, Severity.FAULT,
        f"{at(name, int(lines[0]))} and below: {len(lines)} more {what} of {column} hold no {wanted.partition(' ')[2]};"
        " they count as missing.",
        variable=variable, limit=wanted, file=name, line=int(lines[0]), count=len(lines),
    )  # fmt: skip


def _commas(name: str, remedy: str, column: str, variable: str, text: str, lines: LineArray) -> Finding:
    rest = len(lines) - 1
    fact = (
        f"{at(name, int(lines[0]))}: {column} is '{text[:40]}'{more_rows(rest, ' a number with a comma')};"
        f" expected a number; {'they count' if rest else 'it counts'} as missing"
    )
    return Finding(
        "decimal-comma", Severity.FAULT, f"{fact}; {remedy or 'ask for decimal points'}.",
        variable=variable, value=text[:200], limit="a number", file=name, line=int(lines[0]), count=len(lines),
        to_group=f"{fact}; is the comma the decimal sign?",
    )  # fmt: skip


def impossible(
    grid: Grid,
    quantity: str,
    rows: NDArray[np.int64],
    where: Where,
    texts: Sequence[str],
    codes: Sequence[str],
) -> list[Finding]:
    """Tell each spelling of an impossible date or time once per cast.

    Parameters
    ----------
    grid
        The file.
    quantity
        ``date`` or ``time``.
    rows
        Whose date or time is impossible.
    where, texts, codes
        Station, cast and sample, the text, and the expocode of every row of the file.

    """
    check, wanted = (
        ("impossible-date", "a date YYYYMMDD that exists")
        if quantity == "date"
        else ("impossible-time", "a time hhmm")
    )
    told: dict[tuple[str, str, int, str], list[int]] = {}
    for row in rows.tolist():
        station, cast, _ = where[row]
        told.setdefault((codes[row], station, cast, texts[row]), []).append(row)
    return [
        Finding(
            check, Severity.FAULT,
            f"{at(grid.name, int(grid.cells.lines[same[0]]))}: {grid.word(quantity)} is '{text[:30]}'"
            f"{more_rows(len(same) - 1)}; expected {wanted}; it counts as missing.",
            variable=quantity, value=text[:30], limit=wanted, file=grid.name,
            line=int(grid.cells.lines[same[0]]), station=station, cast=cast, count=len(same),
        )
        for (_, station, cast, text), same in told.items()
    ]  # fmt: skip


def date_order(grid: Grid, order: DateOrder) -> Finding:
    """Tell whether day or month was read first in dates that leave it open, and what decided."""
    words = "day first" if order.day_first else "month first"
    if order.because:
        return Finding(
            "date-order", Severity.NOTE,
            f"{grid.name}: dates such as '{order.example}' were read {words}, because {order.because}.",
            variable="date", value=order.example, limit="YYYYMMDD", file=grid.name,
        )  # fmt: skip
    fact = (
        f"{grid.name}: nothing in the file tells whether '{order.example}' is written month first or day first; month"
        " first was taken; expected YYYYMMDD"
    )
    column, quantity, clock = grid.dates_in or (grid.word("date"), "date", "")
    written = f'"{column}" = {{ quantity = "{quantity}", format = "{date_format(order.example)}{clock}" }}'
    remedy = (
        "ask which is meant"
        if "date" in grid.constants  # one of a header; a description would give it to every cast of a zip
        else f"write {written} under [file.columns] of a cruise.toml where it is day first"
    )
    return Finding(
        "ambiguous-date", Severity.DOUBT, f"{fact}; {remedy}.",
        variable="date", value=order.example, limit="YYYYMMDD", file=grid.name,
        to_group=f"{fact}; which is meant?",
    )  # fmt: skip


def without_dates(
    grid: Grid, expocode: pa.Array, dated: BoolArray, told: BoolArray, keep: BoolArray
) -> list[Spread]:
    """Tell of every cruise none of whose rows has a date.

    Parameters
    ----------
    grid
        The file.
    expocode
        Of every row, (n_row,).
    dated, told
        Which rows have a date, and which have one that was told to be impossible, (n_row,).
    keep
        Which rows are used, (n_row,).

    """
    codes = expocode.filter(pa.array(keep)).dictionary_encode()
    number = np.asarray(codes.indices.to_numpy(zero_copy_only=False), dtype=np.int64)
    known = np.bincount(number, (dated | told)[keep], minlength=len(codes.dictionary)) > 0
    lines = grid.cells.lines[keep]
    several = len(known) > 1
    return [
        _dateless(grid, lines[number == one], codes.dictionary[one].as_py() if several else "")
        for one in np.flatnonzero(~known).tolist()
    ]


def _dateless(grid: Grid, lines: LineArray, cruise: str) -> Spread:
    """Tell it of the rows of one cruise, which is named where the file has several."""
    name, word, what = grid.name, grid.rows_word, "sample" if grid.kind == "bottle" else "cast"

    def tell(mine: LineArray) -> Finding:
        of = f" of {cruise}" if cruise else ""
        rows = (
            f"none of the {len(mine)} {word}{of} has a date"
            if len(mine) > 1
            else f"the one {word[:-1]}{of} has no date"
        )
        fact = f"{name}: {rows}; expected the date of every {what}"
        return Finding(
            "no-date", Severity.DOUBT, f"{fact}; ask for the dates and deliver the file again.",
            variable="date", limit=f"the date of every {what}", file=name, count=len(mine),
            to_group=f"{fact}; please send us the dates.",
        )  # fmt: skip

    return Spread(lines, tell)


def shifted_longitudes(grid: Grid, rows: BoolArray) -> Spread:
    """Tell that longitudes of 180 to 360 were read."""
    name = grid.name

    def tell(mine: LineArray) -> Finding:
        one = len(mine) == 1
        were = "longitude above 180 was" if one else "longitudes above 180 were"
        return Finding(
            "longitude-range", Severity.NOTE,
            f"{name}: {len(mine)} {were} read as degrees east and {'is' if one else 'are'} kept as -180..180.",
            variable="longitude", limit="-180..180", file=name, count=len(mine),
        )  # fmt: skip

    return Spread(grid.cells.lines[rows], tell)


def written_positions(
    grid: Grid, axis: Axis, column: str, rows: NDArray[np.int64], text: str, degrees: float
) -> Spread:
    """Tell that positions with a letter, or in degrees and minutes, were read in a column of decimal degrees."""
    name = grid.name

    def tell(mine: LineArray) -> Finding:
        more = more_rows(len(mine) - 1, " written so")
        return Finding(
            "position-written", Severity.NOTE,
            f"{at(name, int(mine[0]))}: {column} is '{text[:40]}'{more}; it was read as {degrees:.6g} degrees.",
            variable=axis.value, value=text[:200], limit="decimal degrees", file=name, line=int(mine[0]),
            count=len(mine),
        )  # fmt: skip

    return Spread(grid.cells.lines[rows], tell)


def pressure_from_depth(grid: Grid, column: str) -> Finding:
    """Tell that there was no pressure."""
    return Finding(
        "pressure-from-depth", Severity.NOTE,
        f"{grid.name}: there is no pressure; it was computed from the depth in {column}, which is kept beside it.",
        variable="pressure", value=column, limit="a pressure", file=grid.name,
    )  # fmt: skip


def unconverted(grid: Grid, lost: Unconverted, expocode: pa.Array, keep: BoolArray) -> Spread:
    """Tell which values have no density for their conversion, and of how many of their cruises.

    Parameters
    ----------
    grid
        The file.
    lost
        The column and the values.
    expocode
        Of every row, (n_row,).
    keep
        Which rows are used, (n_row,).

    """
    lines, name, column = grid.cells.lines, grid.name, lost.column
    codes = np.asarray(expocode.dictionary_encode().indices.fill_null(-1).to_numpy(zero_copy_only=False))
    given = codes[lost.given & keep]
    kept, unit = delivered_column(column), REGISTRY[column.name].unit.replace(" kg-1", "/kg")

    def tell(mine: LineArray) -> Finding:
        total = int(np.isin(given, codes[np.searchsorted(lines, mine)]).sum())
        alone = len(mine) == 1
        some = "none" if len(mine) == total else str(len(mine))
        values = f"the {total} values" if total > 1 else "the one value"
        fact = (
            f"{name}: {some} of {values} of {column.delivered} could {'be' if some == 'none' else 'not be'} converted"
            f" from {column.unit} to {unit}, because the {'row has' if alone else 'rows have'} no salinity or"
            f" temperature for {'its' if alone else 'their'} density; {'it counts' if alone else 'they count'} as"
            f" missing, and as delivered {'it stands' if alone else 'they stand'} in {kept}"
        )
        them = "it" if alone else "them"
        return Finding(
            "not-converted", Severity.DOUBT, f"{fact}; deliver salinity and temperature with {them}.",
            variable=column.name, value=column.unit, limit=unit, file=name, count=len(mine),
            to_group=f"{fact}; please send us salinity and temperature with {them}, or the values in {unit}.",
        )  # fmt: skip

    return Spread(lines[lost.rows & keep], tell)


def conversions(
    grid: Grid, told: Iterable[Finding | Spread], lost: Sequence[Unconverted]
) -> list[Finding | Spread]:
    """Return what was told with each conversion of a unit bound to the rows of which a value was converted."""
    by_name = {one.column.name: one for one in lost}
    kept: list[Finding | Spread] = []
    for one in told:
        of = (
            by_name.get(one.variable or "")
            if isinstance(one, Finding) and one.check == "unit-converted"
            else None
        )
        if of is None or isinstance(one, Spread):
            kept.append(one)
            continue
        converted = grid.cells.lines[of.given & ~of.rows]
        if len(converted):
            kept.append(Spread(converted, lambda _, one=one: one))  # type: ignore[misc]
    return kept


def blank_to_null(column: pa.Array) -> pa.Array:
    """Return a column of text with what is missing in it as null."""
    blank = pc.match_substring_regex(column, r"^(-999(\.0*)?)?$")
    return pc.if_else(blank, pa.scalar(None, pa.string()), column)
