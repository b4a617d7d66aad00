"""Small exchange files made up for tests: only what a test changes is written in the test."""

from __future__ import annotations

import io
import zipfile
from typing import TYPE_CHECKING

from pipeline.reading import read_delivery
from pipeline.settings import ReadingSettings

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from pipeline.reading import Delivery

EXPOCODE = "ZZV120090214"
NAMES = (
    "EXPOCODE,SECT_ID,STNNBR,CASTNO,SAMPNO,BTLNBR,BTLNBR_FLAG_W,DATE,TIME,LATITUDE,LONGITUDE,DEPTH,CTDPRS,CTDTMP,"
    "CTDSAL,CTDSAL_FLAG_W,SALNTY,SALNTY_FLAG_W,OXYGEN,OXYGEN_FLAG_W,NITRAT,NITRAT_FLAG_W,PHSPHT,PHSPHT_FLAG_W"
).split(",")
UNITS = {
    "DEPTH": "METERS", "CTDPRS": "DBAR", "CTDTMP": "ITS-90", "CTDSAL": "PSS-78", "SALNTY": "PSS-78",
    "OXYGEN": "UMOL/KG", "NITRAT": "UMOL/KG", "PHSPHT": "UMOL/KG",
}  # fmt: skip
ROW = {
    "EXPOCODE": EXPOCODE, "SECT_ID": "V01", "STNNBR": "1", "CASTNO": "1", "SAMPNO": "1", "BTLNBR": "1",
    "BTLNBR_FLAG_W": "2", "DATE": "20090214", "TIME": "0803", "LATITUDE": "-35.5000", "LONGITUDE": "-12.2500",
    "DEPTH": "4100", "CTDPRS": "1000.0", "CTDTMP": "4.0000", "CTDSAL": "34.5000", "CTDSAL_FLAG_W": "2",
    "SALNTY": "34.5010", "SALNTY_FLAG_W": "2", "OXYGEN": "200.0", "OXYGEN_FLAG_W": "2", "NITRAT": "30.00",
    "NITRAT_FLAG_W": "2", "PHSPHT": "2.000", "PHSPHT_FLAG_W": "2",
}  # fmt: skip
LIMITS = ReadingSettings()


def bottle_file(
    *rows: Mapping[str, str],
    extra: Mapping[str, str] | None = None,
    units: Mapping[str, str] | None = None,
    names: Sequence[str] = NAMES,
    end: str = "END_DATA\n",
    stamp: str = "BOTTLE,20260101INVENTED",
) -> bytes:
    """Return a bottle file whose rows differ from ``ROW`` as said; ``extra`` adds columns with their unit.

    Row k (from 0) stands on line 4 + k.
    """
    extra = extra or {}
    columns = [*names, *extra]
    unit_of = {**UNITS, **extra, **(units or {})}
    lines = [stamp, ",".join(columns), ",".join(unit_of.get(name, "") for name in columns)]
    for number, changed in enumerate(rows or [{}], start=1):
        row = {**ROW, "SAMPNO": str(number), "BTLNBR": str(number), **dict.fromkeys(extra, "1"), **changed}
        lines.append(",".join(row[name] for name in columns))
    return ("\n".join(lines) + "\n" + end).encode()


def cast_file(
    levels: Sequence[str] = ("0.0,2,20.0000,2,35.5000,2", "10.0,2,19.0000,2,35.4000,2"),
    *,
    header: Mapping[str, str] | None = None,
    end: str = "END_DATA\n",
) -> bytes:
    """Return a CTD file with one line of ``levels`` each; the first level stands on line 14."""
    lines = {
        "EXPOCODE": EXPOCODE, "SECT_ID": "V01", "STNNBR": "1", "CASTNO": "1", "DATE": "20090214", "TIME": "0803",
        "LATITUDE": "-35.5000", "LONGITUDE": "-12.2500", "DEPTH": "4100", **(header or {}),
    }  # fmt: skip
    text = ["CTD,20260101INVENTED", f"NUMBER_HEADERS = {lines.pop('NUMBER_HEADERS', len(lines) + 1)}"]
    text += [f"{name} = {value}" for name, value in lines.items()]
    text += [
        "CTDPRS,CTDPRS_FLAG_W,CTDTMP,CTDTMP_FLAG_W,CTDSAL,CTDSAL_FLAG_W",
        "DBAR,,ITS-90,,PSS-78,",
        *levels,
    ]
    return ("\n".join(text) + "\n" + end).encode()


def zipped(members: Mapping[str, bytes]) -> bytes:
    """Return a zip of ``members``, the same bytes at any time of day."""
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, data in members.items():
            member = zipfile.ZipInfo(name)
            member.compress_type = zipfile.ZIP_DEFLATED
            archive.writestr(member, data)
    return buffer.getvalue()


def read(data: bytes, name: str = "cruise_hy1.csv") -> Delivery:
    """Read delivered bytes with the default limits."""
    return read_delivery(name, data, LIMITS)


def one(delivery: Delivery, column: str, row: int = 0) -> object:
    """Return one value of a read table."""
    return delivery.table.column(column)[row].as_py()


def checks(delivery: Delivery) -> list[str]:
    """Return the names of the checks of a delivery's findings."""
    return [finding.check for finding in delivery.findings]
