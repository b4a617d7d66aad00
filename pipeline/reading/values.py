"""The measured columns of a delivered file: numbers, flags, missing codes and conversions of unit."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.findings import Finding, Severity, at
from pipeline.reading.columns import Column, Use
from pipeline.reading.numbers import missing_codes, to_flags, to_floats
from pipeline.units import DensityAt, density, scaled
from pipeline.variables import REGISTRY, flag_name

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from pipeline.reading.cells import Cells

    FloatArray = NDArray[np.float64]

# Beyond this many cells a column's unreadable values are told in one sentence.
_MOST_CELLS_TOLD = 50


@dataclass(frozen=True, slots=True)
class Unreadable:
    """Cells of one column that hold no number."""

    column: Column
    rows: NDArray[np.int64]
    texts: tuple[str, ...]


@dataclass
class Values:
    """Columns of n_row rows by their name in our table, with what could not be read."""

    numbers: dict[str, FloatArray] = field(default_factory=dict)
    flags: dict[str, FloatArray] = field(default_factory=dict)
    extras: dict[str, pa.Array] = field(default_factory=dict)
    metadata: dict[str, dict[str, str]] = field(default_factory=dict)
    unreadable: list[Unreadable] = field(default_factory=list)
    unconverted: dict[str, int] = field(default_factory=dict)


def read_values(columns: Sequence[Column], cells: Cells, *, decimal_comma: bool) -> Values:
    """Read every measured, flag and pass-through column.

    Flags are read first: a code such as -9 is missing only where the flag says so.
    """
    values = Values()
    for column in columns:
        if column.use is Use.FLAG:
            flags, bad = to_flags(cells.columns[column.position])
            values.flags[column.name] = flags
            _keep_unreadable(values, column, bad, cells)
    for column in columns:
        if column.use is Use.VALUE:
            numbers = _numbers(values, column, cells, decimal_comma=decimal_comma)
            values.numbers[column.name] = numbers
        elif column.use is Use.EXTRA:
            values.extras[column.name] = _extra(cells.columns[column.position], decimal_comma=decimal_comma)
            values.metadata[column.name] = _as_delivered(column)
    _convert(values, columns)
    return values


def _numbers(values: Values, column: Column, cells: Cells, *, decimal_comma: bool) -> FloatArray:
    numbers, bad = to_floats(cells.columns[column.position], decimal_comma=decimal_comma)
    _keep_unreadable(values, column, bad, cells)
    codes = missing_codes(numbers, column.variable, values.flags.get(flag_name(column.name)))
    return np.where(codes, np.nan, numbers)


def _keep_unreadable(values: Values, column: Column, rows: NDArray[np.int64], cells: Cells) -> None:
    if len(rows):
        texts = cells.columns[column.position].take(pa.array(rows)).cast(pa.string()).to_pylist()
        values.unreadable.append(Unreadable(column, rows, tuple(texts)))


def _extra(column: pa.Array, *, decimal_comma: bool) -> pa.Array:
    """Return a column that nobody knows: numbers where every cell is one, else text; missing is missing."""
    numbers, bad = to_floats(column, decimal_comma=decimal_comma)
    if len(bad) == 0 and len(column):
        return pa.array(np.where(missing_codes(numbers, None, None), np.nan, numbers), from_pandas=True)
    if pa.types.is_string(column.type):
        return pc.if_else(pc.equal(column, ""), pa.scalar(None, pa.string()), column)
    return column


def _as_delivered(column: Column) -> dict[str, str]:
    return {"long_name": f"{column.delivered}, as delivered", "units": column.unit}


def _convert(values: Values, columns: Sequence[Column]) -> None:
    """Convert units in place; the delivered numbers stay beside them under the delivered name.

    Temperature comes first, because densities need it.
    """
    changing = [c for c in columns if c.use is Use.VALUE and c.conversion.changes]
    for column in sorted(changing, key=lambda c: c.conversion.density is not DensityAt.NONE):
        delivered = values.numbers[column.name]
        kept = column.delivered if column.delivered not in REGISTRY else f"{column.delivered}_delivered"
        values.extras[kept] = pa.array(delivered, from_pandas=True)
        values.metadata[kept] = _as_delivered(column)
        per_litre = None
        if column.conversion.density is not DensityAt.NONE:
            per_litre = density(column.conversion.density, *_hydrography(values, len(delivered)))
        converted = scaled(delivered, column.conversion, per_litre)
        values.numbers[column.name] = converted
        values.metadata[column.name] = {
            "delivered_units": column.unit, "conversion": column.conversion.words,
        }  # fmt: skip
        lost = int(np.count_nonzero(np.isnan(converted) & ~np.isnan(delivered)))
        if lost:
            values.unconverted[column.name] = lost


def _hydrography(values: Values, n_row: int) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return salinity (the bottle's, else the CTD's), temperature and pressure for densities, (n_row,)."""
    nothing = np.full(n_row, np.nan)
    bottle = values.numbers.get("bottle_salinity", nothing)
    salinity = np.where(np.isnan(bottle), values.numbers.get("ctd_salinity", nothing), bottle)
    return salinity, values.numbers.get("temperature", nothing), values.numbers.get("pressure", nothing)


def unreadable_findings(
    name: str, unreadable: Unreadable, lines: NDArray[np.int64], where: Sequence[tuple[str, int, str | None]]
) -> list[Finding]:
    """Tell which cells of a column hold no number.

    Parameters
    ----------
    name
        The file.
    unreadable
        The cells.
    lines
        Line of each row, (n_row,).
    where
        Station, cast and sample of each row.

    """
    column = unreadable.column
    is_flag = column.use is Use.FLAG
    check, wanted = ("unknown-flag", "a flag of one digit") if is_flag else ("not-a-number", "a number")
    variable = column.variable.name if column.variable else column.name
    findings = []
    for row, text in list(zip(unreadable.rows, unreadable.texts, strict=True))[:_MOST_CELLS_TOLD]:
        station, cast, sample = where[row]
        findings.append(
            Finding(
                check, Severity.FAULT,
                f"{at(name, int(lines[row]))}: {column.delivered} is '{text[:40]}'; expected {wanted}; it counts as"
                " missing.",
                variable=variable, value=text[:200], limit=wanted, file=name, line=int(lines[row]),
                station=station, cast=cast, sample=sample,
            )
        )  # fmt: skip
    left = len(unreadable.rows) - len(findings)
    if left:
        row = unreadable.rows[len(findings)]
        findings.append(
            Finding(
                check, Severity.FAULT,
                f"{at(name, int(lines[row]))} and below: {left} more cells of {column.delivered} hold no {wanted[2:]};"
                " they count as missing.",
                variable=variable, limit=wanted, file=name, line=int(lines[row]), count=left,
            )
        )  # fmt: skip
    return findings
