"""A guess at how a table is laid out: delimiter, decimal sign, where names, units and data stand. For drafts only."""

from __future__ import annotations

import re
from collections import Counter
from dataclasses import dataclass, replace
from itertools import islice
from typing import TYPE_CHECKING

from pipeline.reading.delimited import cells_of
from pipeline.reading.description import Layout
from pipeline.reading.numbers import is_number
from pipeline.reading.workbook import BROKEN, broken, open_workbook
from pipeline.reading.worksheet import in_text, sheet_rows

if TYPE_CHECKING:
    from collections.abc import Sequence

    from pipeline.reading.workbook import SheetPart, Workbook
    from pipeline.settings import ReadingSettings

_LOOKED_AT = 200  # rows
_DELIMITERS = ("\t", ";", ",", "|", " ")
_COMMA_NUMBER = re.compile(r"[+-]?\d+,\d+$")
_DATE = re.compile(r"\d{1,4}[-/.:]\d{1,2}([-/.:]\d{1,4})?([T ].*)?$")


@dataclass(frozen=True, slots=True)
class Guess:
    """A layout and why it is thought so."""

    layout: Layout
    doubts: tuple[str, ...] = ()


def guess_text_layout(text: str, encoding: str | None) -> Guess:
    """Return how a delimited text seems to be laid out."""
    written = [
        (number, line)
        for number, line in enumerate(islice(text.split("\n"), _LOOKED_AT), start=1)
        if line.strip() and not line.lstrip().startswith("#")
    ]
    comment = "#" if any(line.lstrip().startswith("#") for line in text.split("\n")[:_LOOKED_AT]) else None
    delimiter = _delimiter([line for _, line in written])
    rows = [(number, cells_of(line, delimiter)) for number, line in written]
    guess = _lines(rows)
    doubts = list(guess.doubts)
    cells = [cell for _, row in rows for cell in row]
    comma = delimiter != "," and sum(bool(_COMMA_NUMBER.match(cell)) for cell in cells) > sum(
        is_number(cell) and "." in cell for cell in cells
    )
    if comma:
        doubts.append("numbers seem to be written with a decimal comma")
    layout = replace(
        guess.layout, delimiter=delimiter, decimal="," if comma else ".", comment=comment, encoding=encoding
    )
    return Guess(layout, tuple(doubts))


def guess_workbook_layout(name: str, data: bytes, limits: ReadingSettings) -> Guess:
    """Return how a spreadsheet seems to be laid out, and which of its sheets holds the table.

    Raises
    ------
    DeliveryProblem
        Where it is cut or spoiled.

    """
    workbook = open_workbook(name, data, limits)
    with workbook.archive:
        try:
            rows = {part: _first_rows(workbook, part) for part in workbook.sheets}
        except BROKEN as error:
            raise broken(name, error) from error
    if not rows:
        return Guess(Layout(), ("the spreadsheet has no sheet",))
    best = max(rows, key=lambda part: (part.visible, sum(len(cells) for _, cells in rows[part])))
    guess = _lines(rows[best])
    doubts = list(guess.doubts)
    if len(rows) > 1:
        there = ", ".join(f"{part.name}{'' if part.visible else ' (hidden)'}" for part in rows)
        doubts.append(f"the sheets are {there}; the fullest of those that can be seen was taken")
    return Guess(replace(guess.layout, sheet=best.name), tuple(doubts))


def _first_rows(workbook: Workbook, part: SheetPart) -> list[tuple[int, list[str]]]:
    rows = []
    for line, row in islice(sheet_rows(workbook, part, []), _LOOKED_AT):
        if row:
            rows.append((line, [in_text(row.get(i, "")) for i in range(min(max(row) + 1, 500))]))
    return rows


def _delimiter(lines: Sequence[str]) -> str:
    """Return the delimiter that gives most lines one same number of cells, and as many cells as can be."""

    def worth(delimiter: str) -> tuple[int, int]:
        widths = Counter(len(cells_of(line, delimiter)) for line in lines)
        width, count = max(widths.items(), key=lambda item: (item[1], item[0]), default=(1, 0))
        return (count if width > 1 else 0, width)

    return max(_DELIMITERS, key=worth)


def _lines(rows: Sequence[tuple[int, Sequence[str]]]) -> Guess:
    """Return where names, units and data stand: the names are the last row of words before rows of numbers."""
    full = [(line, cells) for line, cells in rows if sum(bool(cell) for cell in cells) > 1]
    if not full:
        return Guess(Layout(), ("no row of column names was found",))
    first = next((i for i, (_, cells) in enumerate(full) if _is_data(cells)), None)
    if first is None or first == 0:
        words = (
            "no row of numbers was found"
            if first is None
            else "no row of column names was found above the data"
        )
        return Guess(Layout(names_line=full[0][0], first_line=full[0][0] + 1), (words,))
    above = full[:first]
    names = above[-1]
    units = None
    if len(above) > 1 and _is_units(above[-1][1], above[-2][1]):
        names, units = above[-2], above[-1]
    layout = Layout(names_line=names[0], units_line=units[0] if units else None, first_line=full[first][0])
    doubts = ("the row above the data was taken for the units",) if units else ()
    return Guess(layout, doubts)


def _is_data(cells: Sequence[str]) -> bool:
    numbers = sum(
        is_number(cell) or bool(_COMMA_NUMBER.match(cell) or _DATE.match(cell)) for cell in cells if cell
    )
    return numbers * 3 >= sum(bool(cell) for cell in cells)


def _is_units(cells: Sequence[str], above: Sequence[str]) -> bool:
    """Return whether a row of words is that of the units: short, and the row above it is the fuller."""
    given = [cell for cell in cells if cell]
    looks = sum(
        bool(re.search(r"[/%°]|dbar|deg|umol|meter|psu|pss|its-|^m$|^c$", cell.lower())) for cell in given
    )
    return len(given) <= sum(bool(cell) for cell in above) and looks * 3 >= len(given)
