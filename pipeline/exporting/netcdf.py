"""A table of a cruise as a CF NetCDF file of profiles (contiguous ragged arrays, CF 9.3.3), as bytes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.exporting.attributes import (
    COORDINATES,
    attributes_of,
    reference_name,
    reference_pressures,
    variable_name,
)
from pipeline.exporting.classic import FILLS, ClassicFile
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

_WHOLE_IN_32_BITS = 2**31
_EPOCH = "seconds since 1970-01-01 00:00:00"


def export_netcdf(name: str, table: pa.Table, mixtures: pa.Table, made: Provenance) -> bytes:
    """Return a table as a NetCDF file; the same table gives the same bytes.

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
    if not table.num_rows:
        raise UsageProblem(
            f"{made.expocode}: it has no {name}, so there is no profile to write; 'seawhence show' tells what it has."
        )
    profiles = as_profiles(table)
    file = ClassicFile(global_attributes(name, table, made))
    writer = _Writer(file, profiles)
    writer.write_profiles()
    writer.write_rows()
    if name == "samples" and mixtures.num_rows:
        writer.write_shares(mixtures)
    writer.write_references()
    return file.as_bytes()


class _Writer:
    """Writes the variables of one file."""

    def __init__(self, file: ClassicFile, profiles: Profiles) -> None:
        self.file, self.profiles, self.table = file, profiles, profiles.table
        file.add_dimension("profile", len(profiles.sizes))
        file.add_dimension("obs", self.table.num_rows)

    def write_profiles(self) -> None:
        """Write what a profile has one of, and how many rows are whose."""
        profiles = self.profiles
        self._add("profile_id", np.array(profiles.names, dtype=object), ("profile",),
                  {"long_name": "Profile: station and cast", "cf_role": "profile_id"})  # fmt: skip
        self._add("row_size", profiles.sizes.astype(np.int32), ("profile",),
                  {"long_name": "Rows of the profile", "sample_dimension": "obs"})  # fmt: skip
        firsts = pa.array(profiles.firsts)
        for name in OF_A_CAST:
            if name in self.table.column_names and (name != "date" or self._dates_are_of_casts):
                field, column = self.table.schema.field(name), self.table.column(name).take(firsts)
                self._column(name, field, column, ("profile",))
        if "time" not in self.table.column_names:
            missing = pa.chunked_array([pa.nulls(len(profiles.sizes), pa.timestamp("s", tz="UTC"))])
            self._column("time", arrow_field(REGISTRY["time"]), missing, ("profile",))

    @property
    def _dates_are_needed(self) -> bool:
        """Whether the times do not say them: some are missing, or differ from row to row."""
        names = self.table.column_names
        return "date" in names and (
            "time" not in self.profiles.constant or self.table.column("time").null_count > 0
        )

    @property
    def _dates_are_of_casts(self) -> bool:
        return self._dates_are_needed and "date" in self.profiles.constant

    def write_rows(self) -> None:
        """Write every column that is not the same in all rows of each cast."""
        for field in self.table.schema:
            if field.name == "expocode" or field.name in self.profiles.constant:
                continue
            if field.name == "date" and not self._dates_are_needed:
                continue
            name = f"{field.name}_of_row" if field.name in OF_A_CAST and field.name != "date" else field.name
            self._column(name, field, self._rows_of(field.name), ("obs",))

    def _rows_of(self, name: str) -> pa.ChunkedArray:
        """Return a column; dates are those of the instants where these are known."""
        column = self.table.column(name)
        if name == "date" and "time" in self.table.column_names:
            return pc.coalesce(self.table.column("time").cast(pa.date32()), column)
        return column

    def write_shares(self, mixtures: pa.Table) -> None:
        """Write the shares, by row and source."""
        sources, arrays = share_arrays(self.table, mixtures)
        self.file.add_dimension("source", len(sources))
        self._add(
            "source_water",
            np.array(sources, dtype=object),
            ("source",),
            {"long_name": "Source water, by its code"},
        )
        for name in SHARES:
            attributes = attributes_of(mixtures.schema.field(name), set(SHARES), None)
            self._add(
                name,
                arrays[name],
                ("obs", "source"),
                attributes | {"coordinates": f"{COORDINATES} source_water"},
            )

    def write_references(self) -> None:
        """Write the pressures that potential densities are referred to."""
        for name, value in reference_pressures(self.table.column_names).items():
            self._add(name, np.array(value), (), {"long_name": "Pressure that the density is referred to",
                                                  "standard_name": "reference_pressure", "units": "dbar"})  # fmt: skip

    def _column(
        self, name: str, field: pa.Field, column: pa.ChunkedArray, dimensions: tuple[str, ...]
    ) -> None:
        values, kind_of = _values(field, column)
        flags = values if field.type == pa.int16() else None
        attributes = attributes_of(field, set(self.table.column_names), flags) | kind_of
        title = name if name != field.name else variable_name(name, self.file.names)
        if title != name:
            attributes["seawhence_column"] = name
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
        filled = bool(dimensions) and name != "row_size"
        self.file.add_variable(name, values, dimensions, attributes, filled=filled)


def _values(field: pa.Field, column: pa.ChunkedArray) -> tuple[NDArray[Any], dict[str, str]]:
    """Return a column as an array of what NetCDF stores, missing as fill, and attributes that go with the kind."""
    kind = field.type
    if pa.types.is_timestamp(kind):
        seconds = column.cast(pa.timestamp("s", tz="UTC")).cast(pa.int64()).to_pandas().to_numpy(np.float64)
        return seconds, {"units": _EPOCH, "calendar": "standard", "units_metadata": "leap_seconds: utc"}
    if pa.types.is_floating(kind):
        return np.asarray(column.to_numpy(), dtype=np.float64), {}
    if pa.types.is_integer(kind):
        if kind == pa.int16():
            return np.asarray(column.fill_null(int(FILLS["i2"])).to_numpy(), dtype=np.int16), {}
        numbers = column.cast(pa.int64())
        if all(number is None or abs(number) < _WHOLE_IN_32_BITS for number in numbers.to_pylist()):
            return np.asarray(numbers.fill_null(int(FILLS["i4"])).to_numpy(), dtype=np.int32), {}
        return np.asarray(numbers.to_pandas(), dtype=np.float64), {}
    listed = texts(pa.table({"column": column.cast(pa.string())}), "column")
    return np.array([text or "" for text in listed], dtype=object), {}
