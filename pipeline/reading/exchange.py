"""An exchange sheet, bottle or CTD, to rows: its columns planned, its cells read, its header taken as constants."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from pipeline.findings import Finding, Severity
from pipeline.problems import DeliveryProblem
from pipeline.reading.assembly import assemble
from pipeline.reading.cells import read_cells
from pipeline.reading.columns import plan_columns
from pipeline.reading.delivery import DeliveryKind
from pipeline.reading.describing import describe, read_grid
from pipeline.reading.exchange_names import exchange_meanings, heading_of
from pipeline.reading.grid import Grid
from pipeline.reading.identity import refuse_expocode, usable_expocode
from pipeline.tables import CASTS_CORE
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from pipeline.reading.assembly import ReadRows
    from pipeline.reading.description import Description
    from pipeline.reading.sheet import Sheet
    from pipeline.settings import ReadingSettings

_COMMA_NUMBER = re.compile(rb"(?:^|[;\n])[ \t\"]*([+-]?\d*,\d+)[ \t\"]*(?=[;\r\n]|$)")


def read_sheet(sheet: Sheet, limits: ReadingSettings, description: Description | None = None) -> ReadRows:
    """Read the data rows of an exchange sheet; what a description says stands over what its names mean.

    Raises
    ------
    DeliveryProblem
        Where no row of the file can be used, with the reason.

    """
    heading = heading_of(sheet)
    meanings, odd = exchange_meanings(heading)
    columns, findings = plan_columns(heading, meanings)
    numeric = tuple(column.numeric and description is None for column in columns)
    is_cast = sheet.kind is DeliveryKind.CTD
    constants = _header_constants(sheet) if is_cast else {}
    given = description.constants if description else {}
    if "expocode" in constants and "expocode" not in given and usable_expocode(constants["expocode"]) is None:
        line = 1 + list(sheet.header).index("EXPOCODE") + 1
        raise refuse_expocode(sheet.text.name, constants["expocode"], line)
    grid = Grid(
        sheet.text.name, sheet.kind, sheet.names, sheet.units,
        cells=read_cells(sheet, numeric),
        raw=sheet.text.line,
        constants=constants,
        names_line=sheet.names_line,
        first_line=sheet.first_line,
        holders="header lines or column names" if is_cast else "column names",
        decimal_comma=sheet.delimiter == ";",
    )  # fmt: skip
    told = (*sheet.findings, *_decimal_comma(sheet))
    if description is not None:
        _refuse_other_kind(sheet, description)
        return read_grid(describe(grid, meanings, description), limits, (*told, *odd))
    return assemble(grid, columns, limits, (*told, *odd, *findings))


def _decimal_comma(sheet: Sheet) -> tuple[Finding, ...]:
    """Tell that commas were taken for decimal signs, where there are any in a sheet whose cells semicolons part."""
    found = _COMMA_NUMBER.search(sheet.block) if sheet.delimiter == ";" else None
    if found is None:
        return ()
    name, text = sheet.text.name, found[1].decode()
    line = sheet.first_line + sheet.block.count(b"\n", 0, found.start(1))
    return (
        Finding(
            "decimal-comma-assumed", Severity.NOTE,
            f"{name}, line {line}: its cells are parted by semicolons; commas in numbers were read as decimal signs,"
            f" such as '{text}'.",
            value=text, limit="decimal points", file=name, line=line,
        ),
    )  # fmt: skip


def _refuse_other_kind(sheet: Sheet, description: Description) -> None:
    if description.kind not in {None, sheet.kind}:
        raise DeliveryProblem(
            "other-kind",
            f"{sheet.text.name}, line 1: found the stamp of a {sheet.kind} file; expected kind {description.kind}, as"
            f" {description.place()} says; correct it there.",
            1,
        )


def _header_constants(sheet: Sheet) -> dict[str, str]:
    """Return what the header lines of a cast say of all its rows, by the registry's name."""
    return {
        name: sheet.header[key]
        for name in CASTS_CORE
        for key in REGISTRY[name].exchange
        if key in sheet.header
    }
