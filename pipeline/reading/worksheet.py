"""One sheet of a spreadsheet under a description to columns of cells; every row that holds anything is there."""

from __future__ import annotations

import difflib
import re
from array import array
from dataclasses import dataclass, field
from datetime import datetime, timedelta
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa

from pipeline.findings import Finding, Severity, at
from pipeline.problems import DeliveryProblem
from pipeline.reading.cells import Cells
from pipeline.reading.headings import TableCells, named, refuse_cells, refuse_columns
from pipeline.reading.workbook import BROKEN, Shown, broken, elements, is_true, local, open_workbook, text_of

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator
    from xml.etree.ElementTree import Element

    from pipeline.reading.description import Description
    from pipeline.reading.workbook import SheetPart, Workbook
    from pipeline.settings import ReadingSettings

    Value = float | str

_MOST_COLUMNS = 16_384  # of any spreadsheet
_CELL = re.compile(r"\$?([A-Za-z]{1,3})\$?(\d+)$")
_ROW = frozenset({"row"})
_LAST_DAY = 2_958_466  # the first of January of the year 10000
_EXACT = 2.0**53
_MOST_NAMED = 20  # sheets in one sentence


@dataclass
class _Sparse:
    """One column: the values that there are, and the position of the row of each."""

    rows: array[int] = field(default_factory=lambda: array("q"))
    values: list[Value] = field(default_factory=list)


@dataclass
class _Sheet:
    """What a sheet holds: the rows above the data, and the data column by column."""

    above: dict[int, dict[int, Value]] = field(default_factory=dict)
    columns: dict[int, _Sparse] = field(default_factory=dict)
    lines: list[int] = field(default_factory=list)
    uncomputed: list[str] = field(default_factory=list)  # cells with a formula and no result


def read_workbook(name: str, data: bytes, limits: ReadingSettings, description: Description) -> TableCells:
    """Read the described sheet of a spreadsheet.

    Raises
    ------
    DeliveryProblem
        Where the file is cut or spoiled, too large, or has no such sheet or rows.

    """
    workbook = open_workbook(name, data, limits)
    with workbook.archive:
        part = _chosen(name, workbook, description)
        try:
            return _read(name, workbook, part, limits, description)
        except BROKEN as error:
            raise broken(name, error) from error


def _chosen(name: str, workbook: Workbook, description: Description) -> SheetPart:
    """Return the sheet that is meant: the named one, or the only one that can be seen."""
    wanted = description.layout.sheet
    visible = [sheet for sheet in workbook.sheets if sheet.visible]
    fitting = [sheet for sheet in workbook.sheets if sheet.name == wanted] if wanted else visible
    if len(fitting) == 1:
        return fitting[0]
    some = workbook.sheets[:_MOST_NAMED]
    there = ", ".join(f"'{sheet.name[:60]}'{'' if sheet.visible else ' (hidden)'}" for sheet in some)
    there += f" and {len(workbook.sheets) - len(some)} more" if len(some) < len(workbook.sheets) else ""
    if wanted is None:
        raise DeliveryProblem(
            "which-sheet",
            f'{name}: found the sheets {there or "none"}; expected one sheet; name it as sheet = "..." in'
            f" {description.source}.",
        )
    close = difflib.get_close_matches(wanted.lower(), [sheet.name.lower() for sheet in workbook.sheets], n=1)
    near = next((sheet.name for sheet in workbook.sheets if close and sheet.name.lower() == close[0]), None)
    meant = f"; did you mean '{near[:60]}'" if near else ""
    raise DeliveryProblem(
        "which-sheet",
        f"{name}: found no sheet '{wanted}' but {there or 'none'}; expected the sheet that {description.place()}"
        f" names{meant}{'? Correct' if meant else '; correct'} it there.",
    )


def _read(
    name: str, workbook: Workbook, part: SheetPart, limits: ReadingSettings, description: Description
) -> TableCells:
    layout = description.layout
    sheet, names_line, first = _gathered(name, workbook, part, limits, description)
    if names_line not in sheet.above:
        raise DeliveryProblem(
            "no-heading",
            f"{name}: there is nothing in row {names_line} of the sheet '{part.name}'; expected the column names, as"
            f" {description.source} says; correct it there.",
        )
    heading = sheet.above[names_line]
    units = sheet.above.get(layout.units_line or 0, {})
    n_column = max((*heading, *sheet.columns), default=-1) + 1
    refuse_columns(name, names_line, n_column, limits)
    refuse_cells(name, n_column * len(sheet.lines), limits)
    columns = tuple(_column(sheet.columns.pop(i, _Sparse()), len(sheet.lines)) for i in range(n_column))
    lines = np.array(sheet.lines, dtype=np.int64)
    return TableCells(
        name=name,
        names=named([in_text(heading.get(i, "")) for i in range(n_column)]),
        units=tuple(in_text(units.get(i, "")) for i in range(n_column)),
        cells=Cells(columns, lines, ()),
        raw=row_text(columns, lines),
        names_line=names_line,
        first_line=first,
        findings=_uncomputed(name, sheet.uncomputed),
    )


def _gathered(
    name: str, workbook: Workbook, part: SheetPart, limits: ReadingSettings, description: Description
) -> tuple[_Sheet, int, int]:
    """Return what a sheet holds, the row of the names and the first row of data."""
    layout = description.layout
    sheet = _Sheet()
    names_line = layout.names_line
    first = layout.first_line
    cells = 0
    for line, row in sheet_rows(workbook, part, sheet.uncomputed):
        cells += len(row)
        refuse_cells(name, cells, limits)
        if not row or (layout.comment and in_text(row[min(row)]).startswith(layout.comment)):
            continue
        names_line = names_line or line
        first = first or max(names_line, layout.units_line or 0) + 1
        if line < first:
            if line in {names_line, layout.units_line}:
                sheet.above[line] = row
            continue
        for column, value in row.items():
            sparse = sheet.columns.setdefault(column, _Sparse())
            sparse.rows.append(len(sheet.lines))
            sparse.values.append(value)
        sheet.lines.append(line)
    return sheet, names_line or 1, first or 2


def sheet_rows(
    workbook: Workbook, part: SheetPart, uncomputed: list[str]
) -> Iterator[tuple[int, dict[int, Value]]]:
    """Yield the number of every row that is written down, and its cells by column, from 0.

    ``uncomputed`` is given the places of formulas without a result.
    """
    last = 0
    with workbook.archive.open(part.member) as stream:
        for element in elements(stream, _ROW):
            line = int(element.get("r", last + 1))
            if line <= last:
                raise ValueError(f"row {line} stands behind row {last}")
            last = line
            yield line, dict(_values(element, workbook, uncomputed))


def _values(row: Element, workbook: Workbook, uncomputed: list[str]) -> Iterator[tuple[int, Value]]:
    """Yield the column, from 0, and the value of every cell of a row that holds one."""
    last = -1
    for cell in row:
        if local(cell) != "c":
            continue
        place = cell.get("r", "")
        column = _column_number(place) if place else last + 1
        if not last < column < _MOST_COLUMNS:
            raise ValueError(f"the cell {place[:20]} is out of its order")
        last = column
        value = _value(cell, workbook)
        if value is not None and value != "":
            yield column, value
        elif value is None and any(local(child) == "f" for child in cell):
            uncomputed.append(place)


def _column_number(place: str) -> int:
    match = _CELL.match(place)
    if match is None:
        raise ValueError(f"there is a cell {place[:20]!r}")
    number = 0
    for letter in match[1].upper():
        number = 26 * number + ord(letter) - ord("A") + 1
    return number - 1


def _value(cell: Element, workbook: Workbook) -> Value | None:
    """Return what a cell holds: a number, or text; dates as text; None where there is nothing."""
    kind = cell.get("t", "n")
    if kind == "inlineStr":
        return "".join(text_of(child) for child in cell if local(child) == "is").strip()
    written = next((child.text for child in cell if local(child) == "v"), None)
    if written is None:
        return None
    match kind:
        case "s":
            return workbook.texts[_index(written)]
        case "b":
            return is_true(written)
        case "n":
            number = float(written)
            style = _index(cell.get("s", "0"))
            shown = workbook.styles[style] if workbook.styles else Shown.NUMBER
            return (
                number if shown is Shown.NUMBER else date_text(number, shown, since_1904=workbook.since_1904)
            )
        case _:  # the text of a formula, an error such as #N/A, a date of the newer kind
            return written.strip()


def _index(written: str) -> int:
    number = int(written)
    if number < 0:
        raise ValueError(f"there is a reference {number}")
    return number


def date_text(number: float, shown: Shown, *, since_1904: bool) -> Value:
    """Return a date or time of a spreadsheet as ISO text; the number itself where no calendar has such a day.

    A time of day alone is a number below one. The calendar has a day 60, 29 February 1900, that never was.
    """
    if not 0 <= number < _LAST_DAY:
        return number
    seconds = round(number * 86_400)
    if number < 1 and shown is Shown.TIME:
        return f"{seconds // 3600:02d}:{seconds // 60 % 60:02d}:{seconds % 60:02d}"
    start = datetime(1904, 1, 1) if since_1904 else datetime(1899, 12, 30 + (number < 60))  # noqa: DTZ001 - no zone is known
    instant = start + timedelta(seconds=seconds)
    if shown is Shown.DATE and not seconds % 86_400:
        return instant.date().isoformat()
    return instant.isoformat()


def in_text(value: Value) -> str:
    """Return a cell as text: whole numbers without a point, others with as many digits as they have."""
    if isinstance(value, str):
        return value
    return str(int(value)) if value.is_integer() and abs(value) < _EXACT else repr(value)


def _column(sparse: _Sparse, n_row: int) -> pa.Array:
    """Return a column as float64 where every cell is a number, else as text, (n_row,)."""
    rows = np.frombuffer(sparse.rows, dtype=np.int64) if sparse.rows else np.empty(0, dtype=np.int64)
    if sparse.values and all(isinstance(value, float) for value in sparse.values):
        numbers = np.full(n_row, np.nan)
        numbers[rows] = sparse.values
        return pa.array(numbers, from_pandas=True)
    texts = [""] * n_row
    for row, value in zip(rows.tolist(), sparse.values, strict=True):
        texts[row] = in_text(value)
    return pa.array(texts, pa.string())


def row_text(
    columns: tuple[pa.Array, ...], lines: np.ndarray[tuple[int], np.dtype[np.int64]]
) -> Callable[[int], str]:
    """Return what gives the text of a row by its number in the file."""

    def raw(line: int) -> str:
        row = int(np.searchsorted(lines, line))
        cells = (column[row].as_py() for column in columns)
        return "\t".join("" if cell is None else in_text(cell) for cell in cells)

    return raw


def _uncomputed(name: str, places: list[str]) -> tuple[Finding, ...]:
    if not places:
        return ()
    said = ", ".join(places[:5]) + (", ..." if len(places) > 5 else "")
    return (
        Finding(
            "uncomputed-formula", Severity.FAULT,
            f"{at(name, None)}: {len(places)} cells hold a formula without its result ({said}); they count as missing;"
            " open the file in a spreadsheet program, save it and deliver it again.",
            value=said, file=name, count=len(places),
        ),
    )  # fmt: skip
