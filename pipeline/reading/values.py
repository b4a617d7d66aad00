"""The measured columns of a delivered file: numbers, flags, missing codes and conversions of unit."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import gsw
import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.reading.columns import Column, Use
from pipeline.reading.numbers import missing_codes, to_flags, to_floats
from pipeline.units import LABORATORY_TEMPERATURE, DensityAt, density, scaled
from pipeline.variables import REGISTRY, flag_name

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from pipeline.reading.cells import Cells

    FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Unreadable:
    """Cells of one column that hold no number."""

    column: Column
    rows: NDArray[np.int64]
    texts: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Unconverted:
    """Values of one column that could not be converted, for want of a density."""

    column: Column
    rows: NDArray[np.bool_]  # whose value is lost, (n_row,)
    given: NDArray[np.bool_]  # who had one, (n_row,)


@dataclass(frozen=True, slots=True)
class Surroundings:
    """What conversions of unit need to know of n_row rows beside the measured columns."""

    latitude: FloatArray  # (n_row,), NaN where not known
    laboratory_temperature: float = LABORATORY_TEMPERATURE  # degC, where no column gives it


@dataclass
class Values:
    """Columns of n_row rows by their name in our table, with what could not be read."""

    numbers: dict[str, FloatArray] = field(default_factory=dict)
    flags: dict[str, FloatArray] = field(default_factory=dict)
    extras: dict[str, pa.Array] = field(default_factory=dict)
    metadata: dict[str, dict[str, str]] = field(default_factory=dict)
    unreadable: list[Unreadable] = field(default_factory=list)
    unconverted: list[Unconverted] = field(default_factory=list)
    pressure_from: str = ""  # the delivered column of depths from which the pressure was computed, if it was


def read_values(
    columns: Sequence[Column], cells: Cells, surroundings: Surroundings, *, decimal_comma: bool
) -> Values:
    """Read every measured, flag and pass-through column.

    Flags are read first: a code such as -9 is missing only where the flag says so.
    """
    values = Values()
    for column in columns:
        if column.use is Use.FLAG:
            flags, bad = to_flags(cells.columns[column.position])
            values.flags[column.name] = flags
            _keep_unreadable(values, column, bad, cells)
            if column.conversion.words:
                values.metadata[column.name] = {"conversion": column.conversion.words}
    for column in columns:
        if column.use is Use.VALUE:
            numbers = _numbers(values, column, cells, decimal_comma=decimal_comma)
            values.numbers[column.name] = numbers
            values.metadata[column.name] = {
                "delivered_name": column.delivered, "delivered_units": column.unit,
            }  # fmt: skip
        elif column.use is Use.EXTRA:
            values.extras[column.name] = _extra(cells.columns[column.position], decimal_comma=decimal_comma)
            values.metadata[column.name] = _as_delivered(column)
    _convert(values, columns, surroundings)
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


def _convert(values: Values, columns: Sequence[Column], surroundings: Surroundings) -> None:
    """Convert units in place; the delivered numbers stay beside them under the delivered name.

    Densities need temperature and pressure, and a pressure may have to be made from a depth: that is the order.
    """
    changing = [c for c in columns if c.use is Use.VALUE and c.conversion.changes]
    for column in changing:
        if column.conversion.density is DensityAt.NONE:
            _set(
                values,
                column,
                scaled(values.numbers[column.name], column.conversion),
                column.conversion.words,
            )
    _pressure_from_depth(values, columns, surroundings)
    for column in changing:
        if column.conversion.density is not DensityAt.NONE:
            per_litre, words = _density(values, column.conversion.density, surroundings)
            converted = scaled(values.numbers[column.name], column.conversion, per_litre)
            _set(values, column, converted, column.conversion.words + words)


def _set(values: Values, column: Column, converted: FloatArray, words: str) -> None:
    """Put converted numbers in the place of the delivered ones, and these beside them."""
    delivered = values.numbers[column.name]
    _keep_delivered(values, column, delivered)
    values.numbers[column.name] = converted
    lost = np.isnan(converted) & ~np.isnan(delivered)
    if not lost.any():
        values.metadata[column.name] |= {"conversion": words}
        return
    given = ~np.isnan(delivered)
    values.unconverted.append(Unconverted(column, lost, given))
    if (given & ~lost).any():
        values.metadata[column.name] |= {"conversion": words}


def delivered_column(column: Column) -> str:
    """Return the name under which the delivered numbers of a converted column stay."""
    return column.delivered if column.delivered not in REGISTRY else f"{column.delivered}_delivered"


def _keep_delivered(values: Values, column: Column, delivered: FloatArray) -> None:
    kept = delivered_column(column)
    values.extras[kept] = pa.array(delivered, from_pandas=True)
    values.metadata[kept] = _as_delivered(column)


def _pressure_from_depth(values: Values, columns: Sequence[Column], surroundings: Surroundings) -> None:
    """Compute the pressure where only a depth was delivered; where both were, the depth passes through."""
    column = next((c for c in columns if c.use is Use.VALUE and c.name == "depth"), None)
    if column is None:
        return
    depth = values.numbers.pop("depth")
    made = values.metadata.pop("depth", {}).get("conversion")
    if made is None:
        _keep_delivered(values, column, depth)
    if "pressure" in values.numbers:
        return
    level = np.where((depth > -5.0) & (depth < 12_000.0), depth, np.nan)  # above that, gsw raises
    north = np.where(np.abs(surroundings.latitude) <= 90.0, surroundings.latitude, np.nan)
    values.numbers["pressure"] = np.asarray(gsw.p_from_z(-level, north), dtype=np.float64)
    words = "; ".join(
        part for part in (made, "depth (m) to pressure at the latitude, TEOS-10, gsw.p_from_z") if part
    )
    values.metadata["pressure"] = {
        "delivered_name": column.delivered, "delivered_units": column.unit, "conversion": words,
    }  # fmt: skip
    values.pressure_from = column.delivered


def _density(values: Values, at: DensityAt, surroundings: Surroundings) -> tuple[FloatArray, str]:
    """Return the density (kg/l) of the volumes in which an amount was measured, (n_row,), and more of how in words."""
    n_row = len(surroundings.latitude)
    salinity, temperature, pressure = _hydrography(values, n_row)
    if at is DensityAt.LABORATORY:
        given = values.numbers.get("laboratory_temperature", np.full(n_row, np.nan))
        warmth = np.where(np.isnan(given), surroundings.laboratory_temperature, given)
        some, other = not np.isnan(given).all(), bool(np.isnan(given).any())
        words = ["as delivered"] * some + [f"{surroundings.laboratory_temperature:g} degC"] * other
        return density(at, salinity, warmth, pressure), f", {', else '.join(words)}"
    potential = density(DensityAt.POTENTIAL, salinity, temperature, pressure)
    if at is DensityAt.DRAW and "draw_temperature" in values.numbers:
        draw = density(at, salinity, values.numbers["draw_temperature"], pressure)
        return np.where(np.isnan(draw), potential, draw), ""
    return potential, ""


def _hydrography(values: Values, n_row: int) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return salinity (the bottle's, else the CTD's), temperature and pressure for densities, (n_row,)."""
    nothing = np.full(n_row, np.nan)
    bottle = values.numbers.get("bottle_salinity", nothing)
    salinity = np.where(np.isnan(bottle), values.numbers.get("ctd_salinity", nothing), bottle)
    return salinity, values.numbers.get("temperature", nothing), values.numbers.get("pressure", nothing)
