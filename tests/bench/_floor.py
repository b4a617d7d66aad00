"""The floor: the work that no program for this job is spared, done bare, one file after the other.

pyarrow reads each delivered table; gsw makes the TEOS-10 columns that ``samples`` holds; five Parquet tables are
written with the archive's columns, codec and options. What a column holds that needs more than that (checks, tracers,
mixing) is taken from a cruise of the same columns in an archive made before. Nothing is checked, no cell is questioned,
no row is counted, no byte is kept or hashed, and nothing waits for the disk.
"""

from __future__ import annotations

import io
import sys
from pathlib import Path
from typing import TYPE_CHECKING

import gsw
import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
from pyarrow import csv

from pipeline.archive.writing import write_table
from pipeline.tables import TABLE_NAMES
from pipeline.variables import EXCHANGE_NAMES, flag_name

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]

_ABOVE = 4  # stamp, comment, names, units
_END = b"END_DATA\n"


def main(arguments: list[str]) -> None:
    """Do the work for every file of an inbox: ``INBOX ARCHIVE OUT``."""
    inbox, archive, out = map(Path, arguments)
    for name in TABLE_NAMES:
        (out / name).mkdir(parents=True)
    files = sorted(inbox.iterdir())
    made: dict[
        tuple[str, ...], dict[str, pa.Table]
    ] = {}  # the archive's tables, by the columns that were delivered
    for file in files:
        data = file.read_bytes()
        names = tuple(data.split(b"\n", _ABOVE)[2].decode().split(","))
        if names not in made:
            made[names] = _tables(archive, names)
        _one(file.stem, names, data, made[names], out)


def _tables(archive: Path, names: tuple[str, ...]) -> dict[str, pa.Table]:
    """Return the tables of a cruise that was delivered with these columns."""
    own = {_ours(name) for name in names}
    for path in sorted((archive / "samples").iterdir()):
        if own <= set(pq.read_schema(path).names):
            return {table: pq.read_table(archive / table / path.name) for table in TABLE_NAMES}
    raise SystemExit(f"{archive}: no cruise in it has the columns {', '.join(sorted(own))}")


def _one(name: str, names: tuple[str, ...], data: bytes, made: dict[str, pa.Table], out: Path) -> None:
    """Read, convert and write one cruise."""
    delivered = csv.read_csv(
        io.BytesIO(data.removesuffix(_END)),
        read_options=csv.ReadOptions(column_names=list(names), skip_rows=_ABOVE, use_threads=False),
        convert_options=csv.ConvertOptions(null_values=["-999.0", "-999.00", "-999.000", "-999.0000"]),
    )
    delivered = delivered.filter(delivered.column("CTDPRS").is_valid())  # rows without one are no samples
    samples = made["samples"]
    columns = dict(zip(samples.column_names, samples.columns, strict=True))
    for given, column in zip(names, delivered.columns, strict=True):
        ours = _ours(given)
        if ours in columns and columns[ours].type == column.type:
            columns[ours] = column
        elif ours in columns and ours.endswith("_flag"):
            columns[ours] = column.cast(pa.int16())
    columns |= {ours: pa.array(values, from_pandas=True) for ours, values in _teos_10(delivered).items()}
    tables = {**made, "samples": pa.table(list(columns.values()), schema=samples.schema)}
    for table in TABLE_NAMES:
        with (out / table / f"{name}.parquet").open("wb") as sink:
            write_table(tables[table], {"seawhence": "the floor"}, sink)


def _ours(given: str) -> str:
    """Return what the archive calls a delivered column."""
    base, _, flag = given.partition("_FLAG_W")
    known = EXCHANGE_NAMES.get(base)
    if known is None:
        return given
    return flag_name(known.name) if flag or given.endswith("_FLAG_W") else known.name


def _teos_10(delivered: pa.Table) -> dict[str, FloatArray]:
    """Return the TEOS-10 columns of ``samples``, (n_row,) each."""
    bottle, ctd, t, p, lat, lon = (
        np.asarray(delivered.column(name).to_numpy(), dtype=np.float64)
        for name in ("SALNTY", "CTDSAL", "CTDTMP", "CTDPRS", "LATITUDE", "LONGITUDE")
    )
    practical = np.where(np.isnan(bottle), ctd, bottle)
    salinity = gsw.SA_from_SP(practical, p, lon, lat)
    heat = gsw.CT_from_t(salinity, t, p)
    squared = np.full(len(p), np.nan)
    squared[:-1] = gsw.Nsquared(salinity, heat, p, lat=lat)[0]
    return {
        "practical_salinity": practical,
        "absolute_salinity": salinity,
        "preformed_salinity": gsw.Sstar_from_SP(practical, p, lon, lat),
        "conservative_temperature": heat,
        "potential_temperature": gsw.pt0_from_t(salinity, t, p),
        "depth": -gsw.z_from_p(p, lat),
        "sigma0": gsw.sigma0(salinity, heat),
        "sigma2": gsw.sigma2(salinity, heat),
        "sigma4": gsw.sigma4(salinity, heat),
        "spiciness0": gsw.spiciness0(salinity, heat),
        "buoyancy_frequency_squared": np.where(np.isfinite(squared), squared, np.nan),
    }


if __name__ == "__main__":
    main(sys.argv[1:])
