"""Tables, as text, spreadsheet or Parquet, that a ``cruise.toml`` describes, to rows."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pipeline.findings import Finding, Severity, at
from pipeline.problems import DeliveryProblem
from pipeline.reading.columns import Meanings
from pipeline.reading.delimited import read_delimited
from pipeline.reading.describing import describe, read_grid
from pipeline.reading.grid import Grid
from pipeline.reading.parquet import PARQUET_MAGIC, read_parquet
from pipeline.reading.worksheet import read_workbook
from pipeline.reading.zips import ZIP_MAGICS
from pipeline.variables import IDENTITY, REGISTRY

if TYPE_CHECKING:
    from pipeline.reading.assembly import ReadRows
    from pipeline.reading.delivery import DeliveryKind
    from pipeline.reading.describing import Described
    from pipeline.reading.description import Description
    from pipeline.reading.headings import TableCells
    from pipeline.settings import ReadingSettings


def read_described(
    name: str, data: bytes, limits: ReadingSettings, description: Description
) -> tuple[DeliveryKind, ReadRows]:
    """Read a table by its description.

    Raises
    ------
    DeliveryProblem
        Where the table is not as described, or no row of it can be used, with the reason.

    """
    kind = description.kind
    if kind is None:
        raise DeliveryProblem(
            "no-kind",
            f'{name}: {description.place()} does not say what the table holds; expected kind = "bottle" or'
            ' kind = "ctd"; add it there.',
        )
    table = table_cells(name, data, limits, description)
    grid = Grid(
        name, kind, table.names, table.units, table.cells, table.raw,
        names_line=table.names_line,
        first_line=table.first_line,
        holders=f"columns and constants that {description.source} gives",
        words={quantity: quantity for quantity in (*IDENTITY, "pressure")},
        decimal_comma=description.layout.decimal == ",",
        described_in=description.place(),
    )  # fmt: skip
    described = describe(grid, Meanings({}, {}), description)
    found = [*table.findings, *_units_assumed(described, description)]
    return kind, read_grid(described, limits, found)


def table_cells(name: str, data: bytes, limits: ReadingSettings, description: Description) -> TableCells:
    """Return the cells of a table, whatever its format; which it is, the bytes tell."""
    found = "parquet" if data.startswith(PARQUET_MAGIC) else "xlsx" if data.startswith(ZIP_MAGICS) else "text"
    said = description.layout.format
    if said is not None and said != found:
        raise DeliveryProblem(
            "other-format",
            f"{name}: found the bytes of a file of the format {found}; expected {said}, as {description.place()} says;"
            " correct it there, or deliver the right file.",
        )
    if found == "parquet":
        return read_parquet(name, data, limits)
    if found == "xlsx":
        return read_workbook(name, data, limits, description)
    return read_delimited(name, data, limits, description)


def _units_assumed(described: Described, description: Description) -> list[Finding]:
    """Tell of quantities whose unit nobody gives, where no column of the file has one."""
    if any(described.grid.units):
        return []  # told column by column in the planning
    columns = [
        f"{entry.column} ({unit})"
        for entry in description.columns
        if entry.quantity not in IDENTITY
        and (unit := REGISTRY[entry.quantity].unit if entry.quantity in REGISTRY else "") not in {"", "1"}
    ]
    if not columns:
        return []
    grid = described.grid
    return [
        Finding(
            "unit-assumed", Severity.NOTE,
            f"{at(grid.name, grid.names_line)}: no unit is given, neither in the file nor in {description.source};"
            f" assumed: {', '.join(columns)}.",
            value=", ".join(columns)[:400], file=grid.name, line=grid.names_line,
            to_group=f"{at(grid.name, grid.names_line)}: no unit is given; assumed: {', '.join(columns)}.",
        )
    ]  # fmt: skip
