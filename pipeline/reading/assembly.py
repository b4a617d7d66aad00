"""A file's cells to one table in canonical columns with its rejects and findings, whatever format they came in."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.findings import Reject, Severity, at
from pipeline.problems import DeliveryProblem
from pipeline.reading import remarks
from pipeline.reading.columns import Column, Use
from pipeline.reading.delivery import DeliveryKind
from pipeline.reading.identity import (
    REASONS,
    Identity,
    departures,
    identify,
    refuse_expocode,
    usable_expocode,
)
from pipeline.reading.instants import Instants, read_instants
from pipeline.reading.numbers import is_number, missing_codes, to_floats
from pipeline.reading.positions import Axis, to_degrees
from pipeline.reading.spread import Spread, flat
from pipeline.reading.values import Surroundings, Values, read_values
from pipeline.tables import CASTS_CORE, SAMPLES_CORE, as_arrow, registry_field
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.findings import Finding
    from pipeline.reading.grid import Grid
    from pipeline.settings import ReadingSettings

# Reasons for a reject that name what is missing by the file's own word for it.
_NAMED = frozenset({"no-station", "no-cast", "no-pressure"})
_REQUIRED = {
    "expocode": "no-expocode",
    "station": "no-station",
    "latitude": "no-position",
    "longitude": "no-position",
    "pressure": "no-pressure",
}


@dataclass(frozen=True, slots=True)
class ReadRows:
    """The rows of one file, all accounted for: ``rows == table.num_rows + len(rejects)``."""

    table: pa.Table
    rows: int
    rejects: tuple[Reject, ...]
    findings: tuple[Finding, ...]
    spread: tuple[Spread, ...] = ()  # those of them that speak of many rows
    words: Mapping[str, str] = field(default_factory=dict)  # quantity to what the file calls it


def assemble(
    grid: Grid, columns: Sequence[Column], limits: ReadingSettings, findings: Sequence[Finding | Spread] = ()
) -> ReadRows:
    """Make the table of a file's rows.

    Parameters
    ----------
    grid
        The file's cells; n_column columns.
    columns
        What each is to us, (n_column,). Where none gives an identity quantity, the grid's constants may.
    limits
        How much of a broken file is borne.
    findings
        What was noticed on the way here; they come first.

    Raises
    ------
    DeliveryProblem
        Where no row of the file can be used, with the reason.

    """
    _require_columns(grid, columns)
    cells = grid.cells
    rows = _Rows(grid, columns)
    identity = rows.identity()
    surroundings = Surroundings(identity.latitude, rows.laboratory_temperature(limits))
    values = read_values(columns, cells, surroundings, decimal_comma=grid.decimal_comma)
    pressure = values.numbers["pressure"]
    unusable = {**identity.unusable, "no-pressure": np.isnan(pressure)}
    rejects = [*_width_rejects(grid, limits), *_row_rejects(grid, rows, unusable, limits)]
    keep = ~np.any(list(unusable.values()), axis=0)
    if not keep.any():
        raise _nothing_usable(grid, rejects, rows)
    instants = rows.instants(identity)
    told = remarks.conversions(grid, findings, values.unconverted)
    told += rows.remarks(identity, instants, values, keep)
    if not any(
        one.check == "time-unit" and one.severity is Severity.FAULT
        for one in findings
        if not isinstance(one, Spread)
    ):
        told += rows.without_dates(identity, instants, keep)
    table = _table(grid, rows, identity, instants, values)
    if not keep.all():
        table = table.filter(pa.array(keep))
    return ReadRows(
        table, len(cells.lines) + len(cells.misfits), tuple(rejects), flat(told),
        tuple(one for one in told if isinstance(one, Spread)),
        {c.name: c.delivered for c in columns if c.use in {Use.IDENTITY, Use.VALUE}} | dict(grid.words),
    )  # fmt: skip


class _Rows:
    """The identity side of the rows: columns, or what all rows have in common."""

    def __init__(self, grid: Grid, columns: Sequence[Column]) -> None:
        self.grid = grid
        self.n_row = len(grid.cells.lines)
        self.lines = grid.cells.lines
        self._columns = columns
        self._given = {
            column.name: grid.cells.columns[column.position]
            for column in columns
            if column.use is Use.IDENTITY
        }
        self.written: dict[Axis, NDArray[np.int64]] = {}  # rows whose position is no plain number

    def has(self, name: str) -> bool:
        return name in self._given or name in self.grid.constants

    def text(self, name: str) -> pa.Array:
        """Return an identity column as text, "" where not given, (n_row,)."""
        if name in self._given:
            column = self._given[name]
            return column if pa.types.is_string(column.type) else pc.fill_null(column.cast(pa.string()), "")
        return pa.repeat(pa.scalar(self.grid.constants.get(name, ""), pa.string()), self.n_row)

    def delivered(self, name: str, row: int) -> str:
        """Return what was delivered as a value in a row, "" where nothing was or where it came as a number."""
        position = next((column.position for column in self._columns if column.name == name), None)
        cell = None if position is None else self.grid.cells.columns[position][row].as_py()
        return cell if isinstance(cell, str) else ""

    def numbers(self, name: str) -> NDArray[np.float64]:
        """Return an identity column as numbers, NaN where missing or no number, (n_row,)."""
        column = self._given.get(name, None) if name in self._given else self.text(name)
        numbers, unreadable = to_floats(column, decimal_comma=self.grid.decimal_comma)
        if len(unreadable) and name in {"latitude", "longitude"}:
            degrees = to_degrees(column, Axis(name))[0]
            self.written[Axis(name)] = unreadable[~np.isnan(degrees[unreadable])]
            numbers = np.where(np.isnan(numbers), degrees, numbers)
        return np.where(missing_codes(numbers, REGISTRY[name], None), np.nan, numbers)

    def laboratory_temperature(self, limits: ReadingSettings) -> float:
        """Return the temperature (degC) at which amounts per volume were measured, where no column gives it."""
        given = to_floats(self.text("laboratory_temperature")[:1], decimal_comma=self.grid.decimal_comma)[0]
        return float(given[0]) if np.isfinite(given).any() else limits.laboratory_temperature

    def identity(self) -> Identity:
        return identify(
            self.text("expocode"),
            self.text("station"),
            self.numbers("cast") if self.has("cast") else None,
            self.numbers("latitude"),
            self.numbers("longitude"),
        )

    def instants(self, identity: Identity) -> Instants:
        return read_instants(
            self.text("date"),
            self.text("time"),
            self.grid.minutes_ahead,
            lambda: departures(identity.expocode),
        )

    def sample(self) -> pa.Array:
        """Return the sample number; the bottle's where no sample number was given."""
        sample, bottle = (
            remarks.blank_to_null(self.text("sample")),
            remarks.blank_to_null(self.text("bottle")),
        )
        return pc.coalesce(sample, bottle)

    def where(self) -> list[tuple[str, int, str | None]]:
        """Return station, cast and sample of every row."""
        cast = self.numbers("cast") if self.has("cast") else np.ones(self.n_row)
        casts = np.nan_to_num(cast, nan=0.0, posinf=0.0, neginf=0.0).astype(int).tolist()
        return list(zip(self.text("station").to_pylist(), casts, self.sample().to_pylist(), strict=True))

    def remarks(
        self, identity: Identity, instants: Instants, values: Values, keep: NDArray[np.bool_]
    ) -> list[Finding | Spread]:
        """Tell what of the kept rows could not be read, or was read in a way worth knowing."""
        grid = self.grid
        told: list[Finding | Spread] = []
        where = self.where() if values.unreadable else []
        for unreadable in values.unreadable:
            told += remarks.unreadable(grid, unreadable, where)
        for quantity, rows in (("date", instants.impossible_dates), ("time", instants.impossible_times)):
            wrong = rows[keep[rows]]
            if len(wrong):
                texts, codes = self.text(quantity).to_pylist(), identity.expocode.to_pylist()
                told += remarks.impossible(grid, quantity, wrong, self.where(), texts, codes)
        if instants.order:
            told.append(remarks.date_order(grid, instants.order))
        for axis, rows in self.written.items():
            if len(rows):
                degrees = float((identity.latitude if axis is Axis.LATITUDE else identity.longitude)[rows[0]])
                text = self.text(axis)[int(rows[0])].as_py()
                told.append(remarks.written_positions(grid, axis, grid.word(axis), rows, text, degrees))
        if identity.shifted_longitudes.any():
            told.append(remarks.shifted_longitudes(grid, identity.shifted_longitudes))
        if values.pressure_from:
            told.append(remarks.pressure_from_depth(grid, values.pressure_from))
        told += [
            remarks.unconverted(grid, lost, identity.expocode, keep)
            for lost in values.unconverted
            if (lost.rows & keep).any()
        ]
        return told

    def without_dates(self, identity: Identity, instants: Instants, keep: NDArray[np.bool_]) -> list[Spread]:
        """Tell of cruises without any date."""
        dated = ~np.isnat(instants.dates)
        if dated[keep].all():
            return []
        told = np.zeros(self.n_row, dtype=bool)
        told[instants.impossible_dates] = True
        return remarks.without_dates(self.grid, identity.expocode, dated, told, keep)


def _require_columns(grid: Grid, columns: Sequence[Column]) -> None:
    """Refuse a file that nowhere holds what every row needs."""
    given = {column.name for column in columns} | set(grid.constants)
    for name, reason in _REQUIRED.items():
        if name not in given and not (name == "pressure" and "depth" in given):
            raise DeliveryProblem(
                reason,
                f"{at(grid.name, grid.names_line)}: there is no {grid.word(name)}; expected it among the"
                f" {grid.holders}; add it and deliver the file again.",
                grid.names_line,
            )


def _width_rejects(grid: Grid, limits: ReadingSettings) -> list[Reject]:
    return [
        Reject(
            grid.name, line, grid.raw(line)[: limits.raw_text], "field-count",
            f"{at(grid.name, line)}: found {found} fields; expected {grid.n_delivered or len(grid.names)}, one for each"
            " column name; correct the row and deliver the file again.",
            usable_expocode(grid.constants.get("expocode", "")),
        )
        for line, found in grid.cells.misfits
    ]  # fmt: skip


def _row_rejects(
    grid: Grid, rows: _Rows, unusable: dict[str, NDArray[np.bool_]], limits: ReadingSettings
) -> list[Reject]:
    """Return the rows that lack what a row needs, each with its first reason in the order of REASONS."""
    reason_of: dict[int, str] = {}
    for reason in REASONS:
        for row in np.flatnonzero(unusable[reason]).tolist():
            reason_of.setdefault(row, reason)
    return [_reject(grid, rows, row, reason, limits) for row, reason in sorted(reason_of.items())]


def _reject(grid: Grid, rows: _Rows, row: int, reason: str, limits: ReadingSettings) -> Reject:
    line = int(rows.lines[row])
    found = _found(rows, reason, row)
    word = grid.word(reason.removeprefix("no-")) if reason in _NAMED else ""
    fact = f"{at(grid.name, line)}: {REASONS[reason].format(value=found, word=word)}"
    remedy = remarks.comma_remedy(grid) if _has_comma(rows, reason, row) else ""
    return Reject(
        grid.name, line, grid.raw(line)[: limits.raw_text], reason,
        f"{fact}; {remedy or 'correct the row and deliver the file again'}.",
        usable_expocode(rows.text("expocode")[row].as_py()),
        f"{fact}; is the comma the decimal sign?" if remedy else "",
    )  # fmt: skip


def _has_comma(rows: _Rows, reason: str, row: int) -> bool:
    """Return whether a needed number is one but for a comma."""
    names = {"no-pressure": ("pressure", "depth"), "no-position": ("latitude", "longitude")}.get(reason, ())
    return any(remarks.has_comma(rows.delivered(name, row)) for name in names)


def _found(rows: _Rows, reason: str, row: int) -> str:
    """Return in words what stands where a needed value should."""
    if reason == "no-pressure":
        written = rows.delivered("pressure", row) or rows.delivered("depth", row)
        return f"'{written[:60]}'" if written.strip() and not is_number(written) else "missing"
    names = {
        "no-expocode": ("expocode",),
        "no-station": ("station",),
        "no-cast": ("cast",),
        "no-position": ("latitude", "longitude"),
    }.get(reason)
    if names is None:
        return "missing"
    written = ", ".join(rows.text(name)[row].as_py() or "" for name in names)
    return f"'{written[:60]}'" if written.strip(", ") else "missing"


def _nothing_usable(grid: Grid, rejects: Sequence[Reject], rows: _Rows) -> DeliveryProblem:
    """Return why a file none of whose rows can be used is refused whole."""
    name = grid.name
    if not rejects:
        return DeliveryProblem(
            "no-rows",
            f"{at(name, grid.first_line)}: there are no data rows; expected at least one below the column names;"
            " ask for the file to be sent again.",
            grid.first_line,
        )
    first = min(rejects, key=lambda reject: reject.line or 0)
    if first.reason == "no-expocode" and rows.n_row:
        return refuse_expocode(name, rows.text("expocode")[0].as_py(), int(rows.lines[0]))
    return DeliveryProblem(
        first.reason,
        f"{name}: none of its {len(rejects)} rows can be used; the first: {first.message}",
        first.line,
    )


def _table(grid: Grid, rows: _Rows, identity: Identity, instants: Instants, values: Values) -> pa.Table:
    """Put the columns together: identity, measured in the order of delivery, what passes through, ledger."""
    bottle = grid.kind is DeliveryKind.BOTTLE
    columns: dict[str, Any] = {
        "expocode": identity.expocode,
        "section": remarks.blank_to_null(rows.text("section")),
        "station": identity.station,
        "cast": identity.cast,
        "sample": rows.sample() if bottle else None,
        "bottle": remarks.blank_to_null(rows.text("bottle")) if bottle else None,
        "bottle_flag": values.flags.get("bottle_flag", np.full(rows.n_row, np.nan)) if bottle else None,
        "date": instants.dates,
        "time": instants.times,
        "latitude": identity.latitude,
        "longitude": identity.longitude,
        "bottom_depth": rows.numbers("bottom_depth"),
        "file": pa.repeat(pa.scalar(grid.name), rows.n_row),
        "line": rows.lines,
    }
    named = {name: columns[name] for name in (SAMPLES_CORE if bottle else CASTS_CORE)}
    for name, numbers in values.numbers.items():
        named[name] = numbers
        beside = f"{name}_flag"
        if beside in values.flags:
            named[beside] = values.flags[beside]
    fields, arrays = [], []
    for name, column in {**named, **values.extras}.items():
        one = registry_field(name) if name in REGISTRY else pa.field(name, column.type)
        if name in values.metadata:
            one = one.with_metadata({**(one.metadata or {}), **values.metadata[name]})
        fields.append(one)
        arrays.append(as_arrow(column, one.type))
    return pa.table(arrays, schema=pa.schema(fields))
