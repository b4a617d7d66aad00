"""The block of data rows to Arrow columns, in bulk; rows of a wrong width are set aside with their text."""

from __future__ import annotations

import io
import re
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
from pyarrow import csv

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.reading.sheet import Sheet

# A line that holds no value: blank, only delimiters, or a comment. It is no row.
_HOLLOW = re.compile(rb"[ \t,;\"]*(#[^\n]*)?")
# The same anywhere in a block between line ends; the literal start makes the search fast.
_HOLLOW_WITHIN = re.compile(rb"\n[ \t,;\"]*[#\n]")

_PADDING = "\x00padding"


@dataclass(frozen=True, slots=True)
class Cells:
    """The data rows of a file as columns.

    ``columns`` maps the position of a delivered column to its values, float64 where asked and
    possible, else trimmed text; ``lines`` (n_row,) holds each row's line in the file.
    """

    columns: tuple[pa.Array, ...]
    lines: NDArray[np.int64]
    misfits: tuple[tuple[int, int], ...]  # line number and number of fields, of rows of a wrong width


def read_cells(sheet: Sheet, numeric: tuple[bool, ...]) -> Cells:
    """Read the data block of a sheet.

    Parameters
    ----------
    sheet
        The parts of the file; n_column columns.
    numeric
        Which columns to read as float64, shape (n_column,). Where a numeric column holds anything
        that is no number, all columns come back as text, for the slower and more careful way.

    """
    block, lines = _without_hollow_lines(sheet)
    if b'"' in block:
        block = block.replace(b'"', b"")  # the format has no quoting; a spreadsheet may add it
    n_column = len(sheet.names)
    padding = _padding(block, sheet.delimiter, n_column)
    try:
        table, misfits = _parse(block, sheet.delimiter, n_column, padding, numeric)
    except pa.ArrowInvalid:
        table, misfits = _parse(block, sheet.delimiter, n_column, padding, (False,) * n_column)
    kept = np.ones(len(lines), dtype=bool)
    if misfits:
        kept[[row for row, _ in misfits]] = False
    columns = tuple(_trimmed(table.column(i).combine_chunks()) for i in range(n_column))
    return Cells(columns, lines[kept], tuple((int(lines[row]), found) for row, found in misfits))


def column_texts(sheet: Sheet, position: int) -> set[str]:
    """Return the different texts of one delivered column, trimmed; rows of a wrong width do not count."""
    block, _ = _without_hollow_lines(sheet)
    delimiter, n_column = sheet.delimiter.encode(), len(sheet.names)
    ends = n_column + _padding(block, sheet.delimiter, n_column) - 1
    cells = {
        line.split(delimiter, position + 1)[position]
        for line in block.replace(b'"', b"").split(b"\n")
        if line.count(delimiter) == ends
    }
    return {cell.decode().strip() for cell in cells}


def _without_hollow_lines(sheet: Sheet) -> tuple[bytes, NDArray[np.int64]]:
    """Return the block without its hollow lines, and the line number of each line that is left."""
    block = sheet.block.rstrip(b" \t\n")
    if not block:
        return b"", np.empty(0, dtype=np.int64)
    n_line = block.count(b"\n") + 1
    lines = np.arange(sheet.first_line, sheet.first_line + n_line, dtype=np.int64)
    if _HOLLOW_WITHIN.search(b"\n" + block + b"\n") is None:
        return block, lines
    written = block.split(b"\n")
    solid = np.array([_HOLLOW.fullmatch(line) is None for line in written])
    return b"\n".join(line for line, keep in zip(written, solid, strict=True) if keep), lines[solid]


def _padding(block: bytes, delimiter: str, n_column: int) -> int:
    """Return how many empty fields the first row has beyond the named columns (a trailing delimiter)."""
    first = block[: block.find(b"\n")] if b"\n" in block else block
    surplus = first.split(delimiter.encode())[n_column:]
    return len(surplus) if all(not cell.strip() for cell in surplus) else 0


def _parse(
    block: bytes,
    delimiter: str,
    n_column: int,
    padding: int,
    numeric: tuple[bool, ...],
) -> tuple[pa.Table, list[tuple[int, int]]]:
    """Return the rows of the right width, and (row, fields) of the others."""
    names = [str(i) for i in range(n_column)] + [f"{_PADDING}{i}" for i in range(padding)]
    types = {name: pa.string() for name in names}
    types |= {str(i): pa.float64() for i in range(n_column) if numeric[i]}
    misfits: list[tuple[int, int]] = []
    if not block:
        return pa.schema(list(types.items())).empty_table(), misfits

    def set_aside(row: Any) -> str:
        misfits.append((row.number - 1, row.actual_columns))
        return "skip"

    table = csv.read_csv(
        io.BytesIO(block),
        read_options=csv.ReadOptions(
            column_names=names,
            use_threads=False,  # row numbers are known to one thread only
            block_size=min(len(block) + 1, 2**31 - 1),
        ),
        parse_options=csv.ParseOptions(
            delimiter=delimiter,
            quote_char=False,
            double_quote=False,
            escape_char=False,
            newlines_in_values=False,
            ignore_empty_lines=False,
            invalid_row_handler=set_aside,
        ),
        convert_options=csv.ConvertOptions(
            column_types=types,
            strings_can_be_null=False,
            decimal_point="," if delimiter == ";" and b"." not in block else ".",
        ),
    )
    return table, misfits


def _trimmed(column: pa.Array) -> pa.Array:
    return pc.utf8_trim_whitespace(column) if pa.types.is_string(column.type) else column
