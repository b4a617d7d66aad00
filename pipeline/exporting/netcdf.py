"""A table of a cruise as a CF NetCDF file of profiles (contiguous ragged arrays, CF 9.3.3), as bytes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa

from pipeline.exporting.attributes import (
    COORDINATES,
    attributes_of,
    reference_name,
    reference_pressures,
    variable_name,
)
from pipeline.exporting.described import global_attributes
from pipeline.exporting.profiles import OF_A_CAST, SHARES, as_profiles, share_arrays
from pipeline.problems import UsageProblem
from pipeline.tables import arrow_field, texts
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from pipeline.archive import Provenance
    from pipeline.exporting.profiles import Profiles

_EPOCH = "seconds since 1970-01-01 00:00:00"
_FILLS = {"f8": np.nan, "i2": np.iinfo(np.int16).min, "i4": np.iinfo(np.int32).min, "i8": np.iinfo(np.int64).min}
_FIRST_ROOM = 1 << 16  # bytes that the library starts with in memory


def export_netcdf(name: str, table: pa.Table, mixtures: pa.Table, made: Provenance) -> bytes:
    """Return a table as a NetCDF-4 file; the same table gives the same bytes.

    Parameters
    ----------
    name
        ``samples`` or ``casts``: a file has one of them, since all its variables are of one kind of profile.
    table, mixtures
        The table, and the shares of its samples; without rows where there are none.
    made
        Where they came from; written into the file.

    Raises
    ------
    UsageProblem
        If the table has no rows: there is no profile to write.

    """
    import netCDF4  # noqa: PLC0415 - it takes a while to load

    if not table.num_rows:
        raise UsageProblem(
            f"{made.expocode}: it has no {name}, so there is no profile to write; 'seawhence show' tells what it has."
        )
    profiles = as_profiles(table)
    file = netCDF4.Dataset("exported.nc", mode="w", memory=_FIRST_ROOM, format="NETCDF4")
    file.setncatts(global_attributes(name, table, made))
    writer = _Writer(file, profiles)
    writer.write_profiles()
    writer.write_rows()
    if name == "samples" and mixtures.num_rows:
        writer.write_shares(mixtures)
    writer.write_references()
    return bytes(file.close())


class _Writer:
    """Writes the variables of one file."""

    def __init__(self, file: Any, profiles: Profiles) -> None:
        self.file, self.profiles, self.table = file, profiles, profiles.table
        file.createDimension("profile", len(profiles.sizes))
        file.createDimension("obs", self.table.num_rows)

    def write_profiles(self) -> None:
        """Write what a profile has one of, and how many rows are whose."""
        profiles = self.profiles
        self._add("profile_id", np.array(profiles.names, dtype=object), ("profile",),
                  {"long_name": "Profile: station and cast", "cf_role": "profile_id"})  # fmt: skip
        self._add("row_size", profiles.sizes.astype(np.int32), ("profile",),
                  {"long_name": "Rows of the profile", "sample_dimension": "obs"})  # fmt: skip
        firsts = pa.array(profiles.firsts)
        for name in OF_A_CAST:
            if name in self.table.column_names and self._is_wanted(name):
                field, column = self.table.schema.field(name), self.table.column(name).take(firsts)
                self._column(name, field, column, ("profile",))
        if "time" not in self.table.column_names:
            missing = pa.chunked_array([pa.nulls(len(profiles.sizes), pa.timestamp("s", tz="UTC"))])
            self._column("time", arrow_field(REGISTRY["time"]), missing, ("profile",))

    def _is_wanted(self, name: str) -> bool:
        """Return whether a profile says so: the date only where some profile has it and not the time."""
        if name != "date":
            return True
        return "time" not in self.table.column_names or self.table.column("time").null_count > 0

    def write_rows(self) -> None:
        """Write every column that is not the same in all rows of each cast."""
        for field in self.table.schema:
            if field.name == "expocode" or field.name in self.profiles.constant:
                continue
            name = f"{field.name}_of_row" if field.name in OF_A_CAST else field.name
            self._column(name, field, self.table.column(field.name), ("obs",))

    def write_shares(self, mixtures: pa.Table) -> None:
        """Write the shares, by row and source."""
        sources, arrays = share_arrays(self.table, mixtures)
        self.file.createDimension("source", len(sources))
        self._add("source_water", np.array(sources, dtype=object), ("source",), {"long_name": "Source water, by its code"})
        for name in SHARES:
            attributes = attributes_of(mixtures.schema.field(name), set(SHARES), None)
            self._add(
                name, arrays[name], ("obs", "source"), attributes | {"coordinates": f"{COORDINATES} source_water"}
            )

    def write_references(self) -> None:
        """Write the pressures that potential densities are referred to."""
        for name, value in reference_pressures(self.table.column_names).items():
            self._add(name, np.array(value), (), {"long_name": "Pressure that the density is referred to",
                                                  "standard_name": "reference_pressure", "units": "dbar"})  # fmt: skip

    def _column(self, name: str, field: pa.Field, column: pa.ChunkedArray, dimensions: tuple[str, ...]) -> None:
        values, kind_of = _values(field, column)
        flags = values if field.type == pa.int16() else None
        attributes = attributes_of(field, set(self.table.column_names), flags) | kind_of
        title = variable_name(name, self.file.variables)
        if title != name:
            attributes["delivered_name"] = name
        if name == "pressure":
            attributes |= {"axis": "Z", "positive": "down"}
        elif name == "depth":
            attributes["positive"] = "down"
        if name != field.name:  # of every row, beside that of the cast, which is the coordinate
            attributes.pop("standard_name", None)
        if dimensions == ("obs",):
            coordinates = COORDINATES if name != "pressure" else COORDINATES.rsplit(" ", 1)[0]
            if reference_pressures([name]):
                coordinates = f"{coordinates} {reference_name(name)}"
            attributes["coordinates"] = coordinates
        self._add(title, values, dimensions, attributes)

    def _add(
        self, name: str, values: NDArray[Any], dimensions: tuple[str, ...], attributes: Mapping[str, Any]
    ) -> None:
        if values.dtype.kind == "O":
            variable = self.file.createVariable(name, str, dimensions)
        else:
            kind = values.dtype.str[1:]
            fill = None if name == "row_size" or not dimensions else _FILLS[kind]
            variable = self.file.createVariable(
                name, kind, dimensions, fill_value=fill, compression="zlib" if dimensions else None, shuffle=True
            )
            variable.set_auto_maskandscale(False)  # noqa: FBT003 - the library's own signature
        variable.setncatts(dict(attributes))
        variable[...] = values


def _values(field: pa.Field, column: pa.ChunkedArray) -> tuple[NDArray[Any], dict[str, str]]:
    """Return a column as an array of what NetCDF stores, missing as fill, and attributes that go with the kind."""
    kind = field.type
    if pa.types.is_timestamp(kind):
        seconds = column.cast(pa.timestamp("s", tz="UTC")).cast(pa.int64()).to_pandas().to_numpy(np.float64)
        return seconds, {"units": _EPOCH, "calendar": "standard", "units_metadata": "leap_seconds: utc"}
    if pa.types.is_floating(kind):
        return np.asarray(column.to_numpy(), dtype=np.float64), {}
    if pa.types.is_integer(kind):
        numbers = [one for one in column.to_pylist() if one is not None]
        small = "i2" if kind == pa.int16() else "i4" if _fits(numbers) else "i8"
        filled = column.cast(pa.int64()).fill_null(int(_FILLS[small]))
        return np.asarray(filled.to_numpy(), dtype=small), {}
    listed = texts(pa.table({"column": column.cast(pa.string())}), "column")
    return np.array([text or "" for text in listed], dtype=object), {}


def _fits(numbers: list[int]) -> bool:
    return all(-(2**31) < number < 2**31 for number in numbers)
