"""An exchange sheet, bottle or CTD, to one table in canonical columns with its rejects and findings."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.findings import Finding, Reject, Severity
from pipeline.problems import DeliveryProblem
from pipeline.reading.cells import Cells, read_cells
from pipeline.reading.columns import Column, Use, plan_columns
from pipeline.reading.delivery import DeliveryKind
from pipeline.reading.identity import REASONS, Identity, identify, refuse_expocode, usable_expocode
from pipeline.reading.instants import Instants, read_instants
from pipeline.reading.numbers import missing_codes, to_floats
from pipeline.reading.values import Values, read_values, unreadable_findings
from pipeline.tables import CASTS_CORE, SAMPLES_CORE, as_arrow, registry_field
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from pipeline.reading.sheet import Sheet
    from pipeline.settings import ReadingSettings

_REQUIRED = {
    "expocode": "no-expocode",
    "station": "no-station",
    "latitude": "no-position",
    "longitude": "no-position",
    "pressure": "no-pressure",
}


@dataclass(frozen=True, slots=True)
class ReadSheet:
    """The rows of one sheet, all accounted for: ``rows == table.num_rows + len(rejects)``."""

    table: pa.Table
    rows: int
    rejects: tuple[Reject, ...]
    findings: tuple[Finding, ...]


def read_sheet(sheet: Sheet, limits: ReadingSettings) -> ReadSheet:
    """Read the data rows of an exchange sheet.

    Raises
    ------
    DeliveryProblem
        Where no row of the file can be used, with the reason.

    """
    columns, findings = plan_columns(sheet)
    _require_columns(sheet, columns)
    cells = read_cells(sheet, tuple(column.numeric for column in columns))
    rows = _Rows(sheet, columns, cells)
    identity = rows.identity()
    values = read_values(columns, cells, decimal_comma=rows.decimal_comma)
    pressure = values.numbers["pressure"]
    unusable = {**identity.unusable, "no-pressure": np.isnan(pressure)}
    rejects = [*_width_rejects(sheet, cells, limits), *_row_rejects(sheet, cells, rows, unusable, limits)]
    keep = ~np.any(list(unusable.values()), axis=0)
    if not keep.any():
        raise _nothing_usable(sheet, rejects, rows)
    instants = rows.instants()
    found = [*sheet.findings, *findings, *rows.findings(identity, instants, values, keep)]
    table = _table(sheet, rows, identity, instants, values, cells.lines)
    if not keep.all():
        table = table.filter(pa.array(keep))
    return ReadSheet(table, len(cells.lines) + len(cells.misfits), tuple(rejects), tuple(found))


class _Rows:
    """The identity side of the data rows: columns of a bottle file, header lines of a CTD file."""

    def __init__(self, sheet: Sheet, columns: Sequence[Column], cells: Cells) -> None:
        self.sheet = sheet
        self.n_row = len(cells.lines)
        self.lines = cells.lines
        self.decimal_comma = sheet.delimiter == ";"
        self._given = {
            column.name: cells.columns[column.position] for column in columns if column.use is Use.IDENTITY
        }
        self._header = {}
        if sheet.kind is DeliveryKind.CTD:
            self._header = {
                REGISTRY[name].name: sheet.header[key]
                for name in CASTS_CORE
                for key in REGISTRY[name].exchange
                if key in sheet.header
            }

    def has(self, name: str) -> bool:
        return name in self._given or name in self._header

    def text(self, name: str) -> pa.Array:
        """Return an identity column as text, "" where not given, (n_row,)."""
        if name in self._given:
            column = self._given[name]
            return column if pa.types.is_string(column.type) else column.cast(pa.string())
        return pa.repeat(pa.scalar(self._header.get(name, ""), pa.string()), self.n_row)

    def numbers(self, name: str) -> NDArray[np.float64]:
        """Return an identity column as numbers, NaN where missing or no number, (n_row,)."""
        column = self._given.get(name, None) if name in self._given else self.text(name)
        numbers, _ = to_floats(column, decimal_comma=self.decimal_comma)
        return np.where(missing_codes(numbers, REGISTRY[name], None), np.nan, numbers)

    def identity(self) -> Identity:
        return identify(
            self.text("expocode"),
            self.text("station"),
            self.numbers("cast") if self.has("cast") else None,
            self.numbers("latitude"),
            self.numbers("longitude"),
        )

    def instants(self) -> Instants:
        return read_instants(self.text("date"), self.text("time"))

    def sample(self) -> pa.Array:
        """Return the sample number; the bottle's where no sample number was given."""
        sample, bottle = _blank_to_null(self.text("sample")), _blank_to_null(self.text("bottle"))
        return pc.coalesce(sample, bottle)

    def where(self) -> list[tuple[str, int, str | None]]:
        """Return station, cast and sample of every row."""
        cast = self.numbers("cast") if self.has("cast") else np.ones(self.n_row)
        casts = np.nan_to_num(cast, nan=0.0, posinf=0.0, neginf=0.0).astype(int).tolist()
        return list(zip(self.text("station").to_pylist(), casts, self.sample().to_pylist(), strict=True))

    def findings(
        self, identity: Identity, instants: Instants, values: Values, keep: NDArray[np.bool_]
    ) -> list[Finding]:
        """Tell what of the kept rows could not be read, or was read in a way worth knowing."""
        name = self.sheet.text.name
        findings: list[Finding] = []
        where = self.where() if values.unreadable else []
        for unreadable in values.unreadable:
            findings += unreadable_findings(name, unreadable, self.lines, where)
        for check, column, rows, wanted in (
            ("impossible-date", "date", instants.impossible_dates, "a date YYYYMMDD that exists"),
            ("impossible-time", "time", instants.impossible_times, "a time hhmm"),
        ):
            findings += self._impossible(check, column, rows[keep[rows]], wanted)
        if instants.ambiguous:
            findings.append(
                Finding(
                    "ambiguous-date", Severity.DOUBT,
                    f"{name}: nothing in the file tells whether '{instants.ambiguous}' is written month first or"
                    " day first; month first was taken; expected YYYYMMDD.",
                    variable="date", value=instants.ambiguous, limit="YYYYMMDD", file=name,
                )
            )  # fmt: skip
        if identity.shifted_longitudes:
            findings.append(
                Finding(
                    "longitude-range", Severity.NOTE,
                    f"{name}: {identity.shifted_longitudes} longitudes above 180 were read as degrees east and are"
                    " kept as -180..180.",
                    variable="longitude", limit="-180..180", file=name, count=identity.shifted_longitudes,
                )
            )  # fmt: skip
        for variable, count in values.unconverted.items():
            findings.append(
                Finding(
                    "not-converted", Severity.DOUBT,
                    f"{name}: {count} values of {REGISTRY[variable].exchange[0]} could not be converted to"
                    f" {REGISTRY[variable].unit}, because the row has no salinity or temperature for its density.",
                    variable=variable, file=name, count=count,
                )
            )  # fmt: skip
        return findings

    def _impossible(self, check: str, column: str, rows: NDArray[np.int64], wanted: str) -> list[Finding]:
        """Tell each spelling of an impossible date or time once per cast."""
        where, texts = (self.where(), self.text(column).to_pylist()) if len(rows) else ([], [])
        told: dict[tuple[str, int, str], list[int]] = {}
        for row in rows:
            station, cast, _ = where[row]
            told.setdefault((station, cast, texts[row]), []).append(int(row))
        return [
            Finding(
                check, Severity.FAULT,
                f"{self.sheet.text.name}, line {self.lines[same[0]]}: {REGISTRY[column].exchange[0]} is '{text[:30]}'"
                f"{f' (and in {len(same) - 1} more rows)' if len(same) > 1 else ''}; expected {wanted}; it counts as"
                " missing.",
                variable=column, value=text[:30], limit=wanted, file=self.sheet.text.name,
                line=int(self.lines[same[0]]), station=station, cast=cast, count=len(same),
            )
            for (station, cast, text), same in told.items()
        ]  # fmt: skip


def _blank_to_null(column: pa.Array) -> pa.Array:
    blank = pc.match_substring_regex(column, r"^(-999(\.0*)?)?$")
    return pc.if_else(blank, pa.scalar(None, pa.string()), column)


def _require_columns(sheet: Sheet, columns: Sequence[Column]) -> None:
    """Refuse a file that lacks a column, or for a CTD file a header line, without which no row can be used."""
    given = {column.name for column in columns}
    if sheet.kind is DeliveryKind.CTD:
        given |= {v.name for v in REGISTRY.values() for key in v.exchange if key in sheet.header}
    for name, reason in _REQUIRED.items():
        if name not in given:
            exchange = REGISTRY[name].exchange[0]
            raise DeliveryProblem(
                reason,
                f"{sheet.text.name}, line {sheet.names_line}: there is no {exchange}; expected it among the"
                f" {'header lines or ' if sheet.kind is DeliveryKind.CTD else ''}column names; add it and deliver"
                " the file again.",
                sheet.names_line,
            )
    if sheet.kind is DeliveryKind.CTD and "EXPOCODE" in sheet.header:
        written = sheet.header["EXPOCODE"]
        if usable_expocode(written) is None:
            raise refuse_expocode(sheet.text.name, written, 1 + list(sheet.header).index("EXPOCODE") + 1)


def _width_rejects(sheet: Sheet, cells: Cells, limits: ReadingSettings) -> list[Reject]:
    expected = len(sheet.names)
    return [
        Reject(
            sheet.text.name, line, sheet.text.line(line)[: limits.raw_text], "field-count",
            f"{sheet.text.name}, line {line}: found {found} fields; expected {expected}, one for each column name;"
            " correct the row and deliver the file again.",
            _only_cruise(sheet),
        )
        for line, found in cells.misfits
    ]  # fmt: skip


def _only_cruise(sheet: Sheet) -> str | None:
    return usable_expocode(sheet.header["EXPOCODE"]) if "EXPOCODE" in sheet.header else None


def _row_rejects(
    sheet: Sheet, cells: Cells, rows: _Rows, unusable: dict[str, NDArray[np.bool_]], limits: ReadingSettings
) -> list[Reject]:
    """Return the rows that lack what a row needs, each with its first reason in the order of REASONS."""
    reason_of: dict[int, str] = {}
    for reason in REASONS:
        for row in np.flatnonzero(unusable[reason]).tolist():
            reason_of.setdefault(row, reason)
    rejects = []
    for row, reason in sorted(reason_of.items()):
        line = int(cells.lines[row])
        found = _found(rows, reason, row)
        code = usable_expocode(rows.text("expocode")[row].as_py())
        rejects.append(
            Reject(
                sheet.text.name, line, sheet.text.line(line)[: limits.raw_text], reason,
                f"{sheet.text.name}, line {line}: {REASONS[reason].format(value=found)}; correct the row and deliver"
                " the file again.",
                code,
            )
        )  # fmt: skip
    return rejects


def _found(rows: _Rows, reason: str, row: int) -> str:
    """Return in words what stands where a needed value should."""
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


def _nothing_usable(sheet: Sheet, rejects: Sequence[Reject], rows: _Rows) -> DeliveryProblem:
    """Return why a file none of whose rows can be used is refused whole."""
    name = sheet.text.name
    if not rejects:
        return DeliveryProblem(
            "no-rows",
            f"{name}, line {sheet.first_line}: there are no data rows; expected at least one below the column names;"
            " ask for the file to be sent again.",
            sheet.first_line,
        )
    first = min(rejects, key=lambda reject: reject.line or 0)
    if first.reason == "no-expocode" and rows.n_row:
        return refuse_expocode(name, rows.text("expocode")[0].as_py(), int(rows.lines[0]))
    return DeliveryProblem(
        first.reason,
        f"{name}: none of its {len(rejects)} rows can be used; the first: {first.message}",
        first.line,
    )


def _table(
    sheet: Sheet,
    rows: _Rows,
    identity: Identity,
    instants: Instants,
    values: Values,
    lines: NDArray[np.int64],
) -> pa.Table:
    """Put the columns together: identity, measured in the order of delivery, what passes through, ledger."""
    bottle = sheet.kind is DeliveryKind.BOTTLE
    columns: dict[str, Any] = {
        "expocode": identity.expocode,
        "section": _blank_to_null(rows.text("section")),
        "station": identity.station,
        "cast": identity.cast,
        "sample": rows.sample() if bottle else None,
        "bottle": _blank_to_null(rows.text("bottle")) if bottle else None,
        "bottle_flag": values.flags.get("bottle_flag", np.full(rows.n_row, np.nan)) if bottle else None,
        "date": instants.dates,
        "time": instants.times,
        "latitude": identity.latitude,
        "longitude": identity.longitude,
        "bottom_depth": rows.numbers("bottom_depth"),
        "file": pa.repeat(pa.scalar(sheet.text.name), rows.n_row),
        "line": lines,
    }
    named = {name: columns[name] for name in (SAMPLES_CORE if bottle else CASTS_CORE)}
    for name, numbers in values.numbers.items():
        named[name] = numbers
        beside = f"{name}_flag"
        if beside in values.flags:
            named[beside] = values.flags[beside]
    fields, arrays = [], []
    for name, column in {**named, **values.extras}.items():
        field = registry_field(name) if name in REGISTRY else pa.field(name, column.type)
        if name in values.metadata:
            field = field.with_metadata({**(field.metadata or {}), **values.metadata[name]})
        fields.append(field)
        arrays.append(as_arrow(column, field.type))
    return pa.table(arrays, schema=pa.schema(fields))
