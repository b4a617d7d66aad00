"""One invented cruise as tables of every kind, and the cruise.toml that describes them."""

from __future__ import annotations

import io
from dataclasses import dataclass, replace
from datetime import date, time
from typing import TYPE_CHECKING, Any

import openpyxl
import pyarrow as pa
import pyarrow.parquet as pq

from pipeline.reading import CRUISE_FILE, read_cruise_file, read_delivery
from tests.invented import EXPOCODE, LIMITS, bottle_file, zipped

if TYPE_CHECKING:
    from collections.abc import Sequence

    from pipeline.reading import Delivery, Description

COLUMNS = (
    "Station", "Cast", "Sample", "Bottle", "Day", "Clock", "Lat", "Lon", "Bottom", "Pressure", "Temp", "Salinity",
    "Oxygen", "QC O2", "Nitrate", "QC NO3",
)  # fmt: skip
TOML = f"""
[[file]]
files = "*"
kind = "bottle"
{{layout}}
[file.constants]
expocode = "{EXPOCODE}"
section = "V01"
[file.columns]
Station = "station"
Cast = "cast"
Sample = "sample"
Bottle = "bottle"
Day = "date"
Clock = "time"
Lat = "latitude"
Lon = "longitude"
Bottom = "bottom_depth"
Pressure = {{{{ quantity = "pressure", unit = "dbar" }}}}
Temp = {{{{ quantity = "temperature", unit = "ITS-90" }}}}
Salinity = {{{{ quantity = "bottle_salinity" }}}}
Oxygen = {{{{ quantity = "bottle_oxygen", unit = "umol/kg", flag = "QC O2" }}}}
Nitrate = {{{{ quantity = "nitrate", unit = "umol/kg", flag = "QC NO3" }}}}
"""


@dataclass(frozen=True)
class Sample:
    """One row of the invented cruise."""

    station: str = "1"
    cast: int = 1
    sample: str = "1"
    bottle: str = "1"
    day: date = date(2009, 2, 14)
    clock: time = time(8, 3)
    latitude: float = -35.5
    longitude: float = -12.25
    bottom: float = 4100.0
    pressure: float = 1000.5
    temperature: float = 4.0
    salinity: float = 34.501
    oxygen: float | None = 200.1
    oxygen_flag: int = 2
    nitrate: float | None = 30.25
    nitrate_flag: int = 2

    @property
    def cells(self) -> tuple[Any, ...]:
        """The values in the order of ``COLUMNS``."""
        return (
            self.station, self.cast, self.sample, self.bottle, self.day, self.clock, self.latitude, self.longitude,
            self.bottom, self.pressure, self.temperature, self.salinity, self.oxygen, self.oxygen_flag, self.nitrate,
            self.nitrate_flag,
        )  # fmt: skip


CRUISE = tuple(
    replace(
        Sample(), station=station, sample=str(number), bottle=str(number), pressure=pressure, nitrate=nitrate
    )
    for number, (station, pressure, nitrate) in enumerate(
        [("1", 10.25, 0.1), ("1", 1000.5, 1 / 3), ("2; deep", 10.0, None), ("2; deep", 4321.125, 30.25)],
        start=1,
    )
)


def description(layout: str = "", text: str = TOML) -> Description:
    """Return the description of the invented tables."""
    found = read_cruise_file(CRUISE_FILE, text.format(layout=layout).encode()).of("cruise.xyz")
    assert found is not None
    return found


def read_table(data: bytes, name: str, layout: str = "", text: str = TOML) -> Delivery:
    """Read a table of the invented cruise."""
    return read_delivery(name, data, LIMITS, description(layout, text))


def as_exchange(rows: Sequence[Sample] = CRUISE) -> bytes:
    """Return the cruise in the exchange format."""
    names = (
        "EXPOCODE,SECT_ID,STNNBR,CASTNO,SAMPNO,BTLNBR,DATE,TIME,LATITUDE,LONGITUDE,DEPTH,CTDPRS,CTDTMP,SALNTY,OXYGEN,"
        "OXYGEN_FLAG_W,NITRAT,NITRAT_FLAG_W"
    ).split(",")
    return bottle_file(
        *(
            {name: _text(cell) for name, cell in zip(names, (EXPOCODE, "V01", *_compact(row)), strict=True)}
            for row in rows
        ),
        names=names,
    )


def as_text(rows: Sequence[Sample] = CRUISE, delimiter: str = ",", decimal: str = ".") -> bytes:
    """Return the cruise as delimited text; a cell that holds the delimiter stands in quotes."""
    lines = [delimiter.join(f'"{name}"' if delimiter in name else name for name in COLUMNS)]
    for row in rows:
        cells = [_text(cell) for cell in row.cells]
        cells = [cell.replace(".", decimal) if "." in cell else cell for cell in cells]
        lines.append(delimiter.join(f'"{cell}"' if delimiter in cell else cell for cell in cells))
    return ("\n".join(lines) + "\n").encode()


def as_workbook(rows: Sequence[Sample] = CRUISE, title: str = "Bottles") -> bytes:
    """Return the cruise as a spreadsheet, dates and times as such."""
    book = openpyxl.Workbook()
    sheet = book.active
    assert sheet is not None
    sheet.title = title
    sheet.append(COLUMNS)
    for row in rows:
        sheet.append(row.cells)
    return saved(book)


def saved(book: openpyxl.Workbook) -> bytes:
    """Return the bytes of a spreadsheet."""
    buffer = io.BytesIO()
    book.save(buffer)
    return buffer.getvalue()


def as_parquet(rows: Sequence[Sample] = CRUISE) -> bytes:
    """Return the cruise as a Parquet table."""
    columns = list(zip(*(row.cells for row in rows), strict=True))
    return parquet(pa.table(dict(zip(COLUMNS, map(list, columns), strict=True))))


def parquet(table: pa.Table) -> bytes:
    """Return the bytes of a Parquet file."""
    buffer = io.BytesIO()
    pq.write_table(table, buffer)
    return buffer.getvalue()


def _compact(row: Sample) -> tuple[Any, ...]:
    station, cast, sample, bottle, day, clock, *others = row.cells
    return station, cast, sample, bottle, day.strftime("%Y%m%d"), clock.strftime("%H:%M:%S"), *others


def _text(cell: Any) -> str:
    return "" if cell is None else cell if isinstance(cell, str) else str(cell)


_SPREADSHEET = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
_OFFICE = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"


def written_workbook(
    sheet: str, *, texts: str = "", formats: str = "", head: str = "", sheets: str = ""
) -> bytes:
    """Return a spreadsheet of one sheet whose parts are given as they are to be written.

    Parameters
    ----------
    sheet
        The rows.
    texts
        Shared texts, ``<si>`` each.
    formats
        ``<xf>`` of each style.
    head
        What stands in the workbook before its sheets.
    sheets
        More sheets; all are the same part.

    """
    kinds = {
        "r1": ("worksheet", "worksheets/one.xml"),
        "r2": ("sharedStrings", "words.xml"),
        "r3": ("styles", "s.xml"),
    }
    relations = "".join(
        f'<Relationship Id="{key}" Type="{_OFFICE}/{kind}" Target="{target}"/>'
        for key, (kind, target) in kinds.items()
    )
    return zipped(
        {
            "xl/workbook.xml": (
                f'<workbook xmlns="{_SPREADSHEET}" xmlns:r="{_OFFICE}">{head}<sheets>'
                f'<sheet name="Bottles" sheetId="1" r:id="r1"/>{sheets}</sheets></workbook>'
            ).encode(),
            "xl/_rels/workbook.xml.rels": f"<Relationships>{relations}</Relationships>".encode(),
            "xl/words.xml": f'<sst xmlns="{_SPREADSHEET}">{texts}</sst>'.encode(),
            "xl/s.xml": (
                f'<x:styleSheet xmlns:x="{_SPREADSHEET}"><x:numFmts><x:numFmt numFmtId="170" formatCode="0.0000"/>'
                f'<x:numFmt numFmtId="171" formatCode="dd\\.mm\\.yyyy"/></x:numFmts><x:cellXfs>{formats}</x:cellXfs>'
                "</x:styleSheet>"
            ).encode(),
            "xl/worksheets/one.xml": (
                f'<worksheet xmlns="{_SPREADSHEET}"><dimension ref="A1"/><sheetData>{sheet}</sheetData></worksheet>'
            ).encode(),
        }
    )
