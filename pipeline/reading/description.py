"""What a ``cruise.toml`` says of a file: which column is which quantity, in what unit, under whose flags."""

from __future__ import annotations

from dataclasses import dataclass, field
from fnmatch import fnmatchcase
from typing import TYPE_CHECKING

from pipeline.reading.schemes import Scheme

if TYPE_CHECKING:
    from collections.abc import Mapping

    from pipeline.reading.delivery import DeliveryKind

# What a column can be beside a quantity of the registry: parts from which one is put together.
DATE_PARTS: Mapping[str, str] = {
    "date_and_time": "date and time of day in one column",
    "year": "year of four digits",
    "month": "month, as a number or by its English name",
    "day": "day of the month",
    "day_of_year": "day of the year, 1 on the first of January; a fraction gives the time of day",
    "hour": "hour, 0 to 24; a fraction gives minutes",
    "minute": "minute",
    "second": "second",
}
POSITION_PARTS: Mapping[str, str] = {
    f"{axis}_{part}": f"{axis}: {words}"
    for axis, sides in (("latitude", "N or S"), ("longitude", "E or W"))
    for part, words in (
        ("degrees", "whole degrees"),
        ("minutes", "minutes of arc"),
        ("seconds", "seconds of arc"),
        ("hemisphere", sides),
    )
}
PARTS: Mapping[str, str] = {**DATE_PARTS, **POSITION_PARTS}


@dataclass(frozen=True, slots=True)
class ColumnEntry:
    """One delivered column."""

    column: str  # as delivered
    quantity: str  # a name of the registry (depth where there is no pressure), or of PARTS
    unit: str | None = None  # None: as the file says, else the registry's
    flag: str | None = None  # the column of its flags, as delivered
    flag_scheme: Scheme = Scheme.WHP
    missing: tuple[str, ...] = ()  # what stands for a missing value in this column, as text
    format: str | None = None  # how dates are written, such as DD.MM.YYYY hh:mm
    line: int | None = None  # in the cruise.toml


@dataclass(frozen=True, slots=True)
class Layout:
    """Where the parts of a table lie; None where the file itself tells. Lines count from 1."""

    format: str | None = None  # text, xlsx or parquet
    delimiter: str | None = None  # one character; a blank means any run of blanks
    decimal: str = "."
    names_line: int | None = None
    units_line: int | None = None
    first_line: int | None = None
    sheet: str | None = None
    encoding: str | None = None
    comment: str | None = None
    missing: tuple[str, ...] = ()  # in any column of values


@dataclass(frozen=True, slots=True)
class Description:
    """All that is said of one file, or of files of one pattern."""

    files: str  # a name or a pattern of names, such as *.xlsx
    kind: DeliveryKind | None = None
    columns: tuple[ColumnEntry, ...] = ()
    # what all rows share: by registry name or part
    constants: Mapping[str, str] = field(default_factory=dict)
    joined: Mapping[str, tuple[str, ...]] = field(default_factory=dict)  # identity from several columns
    layout: Layout = Layout()
    time_zone: int = 0  # minutes that delivered times are ahead of UTC
    source: str = "cruise.toml"  # the file that says so
    line: int | None = None  # of it, where this begins
    files_line: int | None = None  # of it, where the name or pattern stands

    def fits(self, file_name: str) -> bool:
        """Return whether this speaks of a file, by its name without its folder."""
        return fnmatchcase(file_name, self.files)

    def entry(self, quantity: str) -> ColumnEntry | None:
        """Return the column that gives a quantity, if one does."""
        return next((column for column in self.columns if column.quantity == quantity), None)

    def place(self, line: int | None = None) -> str:
        """Return in words where in the ``cruise.toml`` something stands."""
        line = line or self.line
        return f"{self.source}, line {line}" if line else self.source
