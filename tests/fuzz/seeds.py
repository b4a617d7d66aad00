"""The whole files that are broken: one of every format and form that is read."""

from __future__ import annotations

import io
import re
import zipfile
from dataclasses import dataclass
from functools import cache
from typing import TYPE_CHECKING

from tests.invented import bottle_file, cast_file, zipped
from tests.reading import netcdf_files, tables

if TYPE_CHECKING:
    from pipeline.reading import Description

# A workbook says when it was made; a seed must be the same tomorrow.
_INSTANT = re.compile(rb"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\dZ")


@dataclass(frozen=True, slots=True)
class Seed:
    """A file that is read without a fault."""

    name: str
    data: bytes
    description: Description | None = None


@cache
def seeds() -> tuple[Seed, ...]:
    """Return every seed, always in the same order."""
    rows = [{"CTDPRS": str(100.0 * level), "CTDTMP": f"{20 - 2 * level}.5"} for level in range(1, 7)]
    bottle = bottle_file(*rows, extra={"SILCAT": "UMOL/KG", "THINGS": ""})
    units = bottle_file(*rows, units={"OXYGEN": "ML/L", "NITRAT": "UMOL/L", "CTDTMP": "IPTS-68"})
    semicolons = bottle.replace(b".", b"\x00").replace(b",", b";").replace(b"\x00", b",")
    cast = cast_file(tuple(f"{10 * level}.0,2,{20 - level}.0000,2,35.5000,2" for level in range(8)))
    second = cast_file(header={"STNNBR": "2"})
    return (
        Seed("bottle_hy1.csv", bottle),
        Seed("units_hy1.csv", units),
        Seed("semicolons_hy1.csv", semicolons),
        Seed("cast_ct1.csv", cast),
        Seed("casts_ct1.zip", zipped({"a_ct1.csv": cast, "b_ct1.csv": second})),
        Seed("table.csv", tables.as_text(), tables.description()),
        Seed("table.xlsx", _undated(tables.as_workbook()), tables.description()),
        Seed("table.parquet", tables.as_parquet(), tables.description()),
        Seed("classic.nc", _netcdf("NETCDF3_CLASSIC")),
    )


@cache
def slow_seed() -> Seed:
    """Return the seed that is read in a process of its own, which takes a hundred times as long."""
    return Seed("hdf5.nc", _netcdf("NETCDF4"))


def _netcdf(form: str) -> bytes:
    return netcdf_files.netcdf_bytes(netcdf_files.rows(), netcdf_files.Plan(format=form))


def _undated(workbook: bytes) -> bytes:
    with zipfile.ZipFile(io.BytesIO(workbook)) as archive:
        return zipped(
            {name: _INSTANT.sub(b"2009-02-14T00:00:00Z", archive.read(name)) for name in archive.namelist()}
        )
