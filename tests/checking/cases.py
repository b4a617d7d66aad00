"""A planted fault as a case, and the clean tables of the invented ocean that faults are planted in."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cache
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa

from fixtures.ocean.delivery import bottle_sheet, cast_sheet, packed
from fixtures.ocean.section import first_cruise, second_cruise
from pipeline.checking import CHECKS
from pipeline.findings import Severity
from pipeline.reading import read_delivery
from pipeline.settings import ReadingSettings, Settings
from pipeline.tables import cast_groups, floats, with_columns
from pipeline.usable import Rows

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from fixtures.ocean.section import Cruise
    from pipeline.checking.marks import Mark

    FloatArray = NDArray[np.float64]

SETTINGS = Settings()
HEAVE_DBAR = 6.0
DISPLACED = (
    "temperature", "ctd_salinity", "bottle_salinity", "ctd_oxygen", "bottle_oxygen", "nitrate", "nitrite",
    "phosphate", "silicate", "dic", "alkalinity", "delta_carbon_13", "cfc12",
)  # fmt: skip
CRUISES = ("ZZV120090306", "ZZV220210218")


@dataclass(frozen=True)
class Case:
    """One table for one check: with a fault where it must speak, or with a look-alike where it must not.

    ``rows`` are the numbers of the rows that the check must mark (it may mark others besides); none where it
    must be silent about the whole table; None where it must speak and any row will do.
    """

    check: str
    label: str
    table: pa.Table
    rows: frozenset[int] | set[int] | None

    @property
    def must_speak(self) -> bool:
        """Whether there is a fault in the table."""
        return self.rows is None or bool(self.rows)

    def marked(self) -> set[int]:
        """Return the rows that the check marks."""
        return {int(row) for mark in marks_of(self.check, self.table) for row in mark.rows}

    def passes(self) -> bool:
        """Whether the check does on this table what it must."""
        marked = self.marked()
        if self.rows is None:
            return bool(marked)
        return set(self.rows) <= marked if self.rows else not marked


def marks_of(check: str, table: pa.Table, settings: Settings = SETTINGS) -> list[Mark]:
    """Return what one check says of a table."""
    return CHECKS[check].run(Rows(table, settings.use), settings)


def doubted(check: str, table: pa.Table) -> set[int]:
    """Return the rows about which one check raises a doubt or a fault."""
    marks = [mark for mark in marks_of(check, table) if mark.severity is not Severity.NOTE]
    return {int(row) for mark in marks for row in mark.rows}


@cache
def clean_samples(expocode: str = CRUISES[0]) -> pa.Table:
    """Return the bottle samples of an invented cruise, as read, without any fault."""
    sheet = bottle_sheet(_without_strays(expocode))
    return read_delivery(sheet.file, sheet.bytes(), ReadingSettings()).table


@cache
def clean_casts(expocode: str = CRUISES[0]) -> pa.Table:
    """Return the CTD levels of an invented cruise, as read, without any fault."""
    cruise = _without_strays(expocode)
    sheets = [cast_sheet(cruise, station) for station in cruise.stations]
    return read_delivery(sheets[0].file, packed(sheets), ReadingSettings()).table


@cache
def restless_samples(expocode: str = CRUISES[0]) -> pa.Table:
    """Return the clean samples as bottles take them in a restless sea: each from some dbar above or below.

    All quantities of a bottle come from there, as they do; the calm invented ocean is too easy on the checks.
    """
    table = clean_samples(expocode)
    pressure = floats(table, "pressure")
    heave = np.random.default_rng([1, len(expocode), int(expocode[4:8])]).normal(
        0.0, HEAVE_DBAR, len(pressure)
    )
    return _displaced(table, np.maximum(pressure + heave, 0.0))


@cache
def restless_casts(expocode: str = CRUISES[0]) -> pa.Table:
    """Return the clean CTD levels with internal waves and interleaving layers of compensated density."""
    table = clean_casts(expocode)
    pressure, cast = floats(table, "pressure"), cast_groups(table)
    random = np.random.default_rng([2, int(expocode[4:8])])
    n_cast = int(cast.max()) + 1
    waves = sum(
        HEAVE_DBAR * np.sin(pressure / length + random.uniform(0.0, 6.3, n_cast)[cast])
        for length in (17.0, 60.0, 240.0)
    )
    table = _displaced(table, np.maximum(pressure + waves, 0.0))
    core = random.uniform(150.0, 900.0, n_cast)[cast]
    layers = 0.3 * np.sin(pressure / 6.0) * np.exp(-0.5 * ((pressure - core) / 60.0) ** 2)
    warm, salt = floats(table, "temperature") + layers, floats(table, "ctd_salinity") + 0.2 * layers
    return with_columns(table, {"temperature": np.round(warm, 4), "ctd_salinity": np.round(salt, 4)})


def _displaced(table: pa.Table, source: FloatArray) -> pa.Table:
    """Return a table whose measured values are those of other pressures of the same cast, as written in files."""
    pressure, cast = floats(table, "pressure"), cast_groups(table)
    columns = {}
    for name in DISPLACED:
        if name not in table.column_names:
            continue
        values = floats(table, name)
        moved = np.full(len(values), np.nan)
        for number in range(int(cast.max()) + 1):
            here = np.flatnonzero((cast == number) & ~np.isnan(values))
            here = here[np.argsort(pressure[here])]
            if len(here):
                moved[here] = np.interp(source[here], pressure[here], values[here])
        columns[name] = np.round(moved, 4)
    return with_columns(table, columns)


def changed(table: pa.Table, columns: Mapping[str, Mapping[int, object]]) -> pa.Table:
    """Return a table with single cells changed: column name to row number to value."""
    for name, cells in columns.items():
        values = table.column(name).to_pylist()
        for row, value in cells.items():
            values[row] = value
        field = table.schema.field(name)
        table = table.set_column(table.schema.get_field_index(name), field, pa.array(values, type=field.type))
    return table


def rows_of(table: pa.Table, station: str, cast: int = 1) -> list[int]:
    """Return the row numbers of a cast, from the surface down."""
    pressure = table.column("pressure").to_pylist()
    pairs = zip(table.column("station").to_pylist(), table.column("cast").to_pylist(), strict=True)
    rows = [row for row, pair in enumerate(pairs) if pair == (station, cast)]
    return sorted(rows, key=lambda row: pressure[row])


def _without_strays(expocode: str) -> Cruise:
    """Return a cruise without the station whose number is used again, or the one far off the section."""
    cruise = next(c for c in (first_cruise(), second_cruise()) if c.expocode == expocode)
    stray = cruise.stations[-1] if cruise.stations[-1].cast > 1 else cruise.stations[0]
    return replace(cruise, stations=tuple(s for s in cruise.stations if s is not stray))
