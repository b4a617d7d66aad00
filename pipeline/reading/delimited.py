"""Delimited text under a description to columns of cells: quotes, comments, preambles, runs of blanks."""

from __future__ import annotations

import csv
import re
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa

from pipeline.problems import DeliveryProblem
from pipeline.reading.cells import Cells
from pipeline.reading.headings import TableCells, named, refuse_columns
from pipeline.reading.text import delivered_text

if TYPE_CHECKING:
    from collections.abc import Sequence

    from pipeline.reading.description import Description, Layout
    from pipeline.reading.text import DeliveredText
    from pipeline.settings import ReadingSettings

_MOST_JOINED = 20  # lines of one quoted cell
_CHUNK = 20_000  # rows that are lists of texts before they become columns
_CANDIDATES = ("\t", ";", ",", "|")


def read_delimited(name: str, data: bytes, limits: ReadingSettings, description: Description) -> TableCells:
    """Read delimited text.

    Raises
    ------
    DeliveryProblem
        Where it is no text, or the lines that the description names are not there.

    """
    layout = description.layout
    text = _decoded(name, data, layout)
    lines = text.data.decode("utf-8", errors="replace").split("\n")
    comment = layout.comment
    names_line = layout.names_line or _first_written(lines, comment)
    if names_line is None or names_line > len(lines):
        raise _no_line(name, "column names", names_line, len(lines), description)
    heading = lines[names_line - 1]
    delimiter = layout.delimiter or told_delimiter(heading, layout.decimal)
    titles = cells_of(heading, delimiter)
    refuse_columns(name, names_line, len(titles), limits)
    units: list[str] = []
    if layout.units_line is not None:
        if layout.units_line > len(lines):
            raise _no_line(name, "units", layout.units_line, len(lines), description)
        units = cells_of(lines[layout.units_line - 1], delimiter)
    first = layout.first_line or max(names_line, layout.units_line or 0) + 1
    while titles and not titles[-1].strip() and len(titles) > len(units):
        titles.pop()
    columns, numbers, misfits = _rows(lines, first, delimiter, len(titles), comment)
    return TableCells(
        name=name,
        names=named(titles),
        units=tuple((units + [""] * len(titles))[: len(titles)]),
        cells=Cells(columns, np.array(numbers, dtype=np.int64), tuple(misfits)),
        raw=text.line,
        names_line=names_line,
        first_line=first,
        findings=text.findings,
    )


def _decoded(name: str, data: bytes, layout: Layout) -> DeliveredText:
    if layout.encoding is not None:
        try:
            data = data.decode(layout.encoding).encode("utf-8")
        except (UnicodeError, LookupError) as error:
            raise DeliveryProblem(
                "wrong-encoding",
                f"{name}: found bytes that are no {layout.encoding} text ({error}); correct the encoding in the"
                " cruise.toml, or leave it out.",
            ) from error
    return delivered_text(name, data)


def _no_line(
    name: str, what: str, line: int | None, n_line: int, description: Description
) -> DeliveryProblem:
    wanted = f"on line {line}" if line else "on a line"
    return DeliveryProblem(
        "no-heading",
        f"{name}: found {n_line} lines; expected the {what} {wanted}, as {description.source} says; correct it there.",
    )


def _first_written(lines: Sequence[str], comment: str | None) -> int | None:
    return next((i for i, line in enumerate(lines, start=1) if not _is_hollow(line, comment)), None)


def _is_hollow(line: str, comment: str | None) -> bool:
    """Return whether a line holds no value: blank, only delimiters, or a comment. It is no row."""
    if comment is not None and line.lstrip().startswith(comment):
        return True
    return not line.strip(' \t,;|"')


def told_delimiter(heading: str, decimal: str) -> str:
    """Return the delimiter that a line of column names is written with; a blank where it has no other."""
    bare = re.sub(r'"[^"]*"', "", heading)
    counts = {one: bare.count(one) for one in _CANDIDATES if one != decimal}
    best = max(counts, key=lambda one: counts[one])
    return best if counts[best] else " "


def cells_of(line: str, delimiter: str) -> list[str]:
    """Return the cells of one line, trimmed; a quoted cell may hold delimiters."""
    if delimiter == " ":
        line = line.replace("\t", " ").strip()
        if '"' not in line:
            return line.split()
    elif '"' not in line:
        return [cell.strip() for cell in line.split(delimiter)]
    try:
        cells = next(csv.reader([line], delimiter=delimiter, skipinitialspace=True), [])
    except csv.Error:  # a cell longer than the module takes
        cells = line.split(delimiter)
    return [cell.strip() for cell in cells if cell or delimiter != " "]


def _rows(
    lines: Sequence[str], first: int, delimiter: str, n_column: int, comment: str | None
) -> tuple[tuple[pa.Array, ...], list[int], list[tuple[int, int]]]:
    """Return the columns of the rows of the right width, the line of each row, and the rows of other widths."""
    numbers: list[int] = []
    misfits: list[tuple[int, int]] = []
    chunks: list[list[pa.Array]] = [[] for _ in range(n_column)]
    waiting: list[list[str]] = []

    def pour() -> None:
        for position, cells in enumerate(zip(*waiting, strict=True)):
            chunks[position].append(pa.array(cells, pa.string()))
        waiting.clear()

    end = first - 1  # lines that are done with
    while end < len(lines):
        number = end + 1
        if _is_hollow(lines[end], comment):
            end += 1
            continue
        cells, end = _row(lines, end, delimiter, n_column)
        if len(cells) != n_column:
            misfits.append((number, len(cells)))
            continue
        numbers.append(number)
        waiting.append(cells)
        if len(waiting) == _CHUNK:
            pour()
    pour()
    columns = tuple(pa.concat_arrays(parts) if parts else pa.array([], pa.string()) for parts in chunks)
    return columns, numbers, misfits


def _row(lines: Sequence[str], start: int, delimiter: str, n_column: int) -> tuple[list[str], int]:
    """Return the cells of the row that begins on ``lines[start]``, and the number of lines up to its end.

    A quoted cell may go on over a few lines, where that gives a row of the right width; else the line stands for
    itself, so that a quote that is never closed takes no other row with it.
    """
    cells = _fitted(cells_of(lines[start], delimiter), n_column)
    if len(cells) == n_column or lines[start].count('"') % 2 == 0:
        return cells, start + 1
    joined = lines[start]
    for end in range(start + 1, min(start + _MOST_JOINED, len(lines))):
        joined = f"{joined} {lines[end]}"
        if lines[end].count('"') % 2 == 0:
            continue  # the cell is still open
        whole = _fitted(cells_of(joined, delimiter), n_column)
        return (whole, end + 1) if len(whole) == n_column else (cells, start + 1)
    return cells, start + 1


def _fitted(cells: list[str], n_column: int) -> list[str]:
    """Return cells without the blank ones that delimiters at the end of a line make."""
    while len(cells) > n_column and not cells[-1]:
        cells.pop()
    return cells
