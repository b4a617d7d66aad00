"""The archive's tables as lists of registry names, and the Arrow types and metadata that follow from them."""

from __future__ import annotations

from dataclasses import fields
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from pipeline.problems import BrokenPromise
from pipeline.variables import REGISTRY, Kind, Variable

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.findings import Finding, Reject

    FloatArray = NDArray[np.float64]

ARROW_TYPES: dict[Kind, pa.DataType] = {
    Kind.NUMBER: pa.float64(),
    Kind.INTEGER: pa.int64(),
    Kind.FLAG: pa.int16(),  # delivered flags outside the scheme are kept as they are
    Kind.TEXT: pa.string(),
    Kind.DATE: pa.date32(),
    Kind.TIME: pa.timestamp("s", tz="UTC"),
}

KEY = ("expocode", "station", "cast", "sample")
MIXING = (
    "tag", "leading_source", "leading_share", "leading_share_uncertainty", "leading_probability",
    "respiration", "respiration_uncertainty", "reduced_chi_square", "degrees_of_freedom", "condition_number",
    "hull_distance", "mixing_set", "mixing_status",
)  # fmt: skip
MIXTURES = (
    *KEY, "line", "mixing_set", "source", "share", "share_uncertainty", "share_p16", "share_p50", "share_p84",
    "tag", "reduced_chi_square",
)  # fmt: skip
FINDINGS = (
    "expocode", "file", "line", "station", "cast", "sample", "variable", "check", "severity", "count",
    "value", "limit", "message",
)  # fmt: skip
REJECTS = ("expocode", "file", "line", "raw", "reason", "message")
# What differs between two revisions: made when it is asked for, no table of the archive.
CHANGES = (
    *KEY, "pressure", "occurrence", "file", "line", "table", "change", "variable", "before", "after", "difference",
)  # fmt: skip
# How cruises compare, and what would make them agree: made when it is asked for, no tables of the archive.
OFFSETS = (
    "expocode", "other_expocode", "variable", "kind", "offset", "offset_uncertainty",
    "offset_remaining", "offset_remaining_uncertainty", "between_places", "depth_contrast",
    "depth_contrast_uncertainty",
    "mean_difference", "mean_difference_uncertainty", "difference_unit", "surface", "stations", "other_stations",
    "station_pairs", "places", "levels", "years_apart",
)  # fmt: skip
PROPOSALS = (
    "expocode", "variable", "kind", "correction", "correction_uncertainty", "correction_limit", "difference_unit",
    "correction_in_force", "correction_remaining", "correction_remaining_uncertainty",
    "crossovers", "group", "proposed", "why_not",
)  # fmt: skip
# How much of a section each source makes up: made when it is asked for, no table of the archive.
CENSUS = (
    "expocode", "other_expocode", "census_part", "density_column", "density_class", "density_from", "density_below",
    "source", "area", "area_uncertainty", "area_share", "area_share_uncertainty", "other_area_share",
    "area_share_change", "area_share_change_uncertainty", "unresolved_reason", "unresolved_samples",
)  # fmt: skip

# Always there, in this order, whatever was delivered: a reader may rely on them.
SAMPLES_CORE = (
    "expocode", "section", "station", "cast", "sample", "bottle", "bottle_flag", "date", "time",
    "latitude", "longitude", "bottom_depth", "file", "line",
)  # fmt: skip
CASTS_CORE = (
    "expocode", "section", "station", "cast", "date", "time", "latitude", "longitude", "bottom_depth",
    "file", "line",
)  # fmt: skip

_LEDGER = ("file", "line")

TABLE_NAMES = ("samples", "casts", "mixtures", "findings", "rejects")


def arrow_field(variable: Variable, extra: Mapping[str, str] | None = None) -> pa.Field:
    """Return the Arrow field of a registry variable, with its metadata."""
    metadata = {
        "long_name": variable.long_name,
        "units": variable.unit,
        "standard_name": variable.standard_name or "",
        "source": variable.source,
        **(extra or {}),
    }
    return pa.field(
        variable.name,
        ARROW_TYPES[variable.kind],
        metadata={key: text for key, text in metadata.items() if text},
    )


_FIELDS: Mapping[str, pa.Field] = {name: arrow_field(variable) for name, variable in REGISTRY.items()}


def registry_field(name: str) -> pa.Field:
    """Return the Arrow field of the registry column ``name``."""
    try:
        return _FIELDS[name]
    except KeyError as error:
        raise BrokenPromise(f"the column '{name}' is written but is not in the registry") from error


def floats(table: pa.Table, name: str) -> FloatArray:
    """Return column ``name`` as float64, shape (n_row,), NaN where missing or no such column."""
    position = table.schema.get_field_index(name)
    if position < 0:
        return np.full(table.num_rows, np.nan)
    # missing becomes NaN on the way; the array may be the table's own memory, so it is not to be written to
    return np.asarray(table.column(position).to_numpy(), dtype=np.float64)


def texts(table: pa.Table, name: str) -> list[str | None]:
    """Return column ``name`` as a list of text, None where missing or where there is no such column."""
    if table.schema.get_field_index(name) < 0:
        return [None] * table.num_rows
    return [None if text is None else str(text) for text in table.column(name).to_pylist()]


def with_columns(table: pa.Table, columns: Mapping[str, Any]) -> pa.Table:
    """Return ``table`` with registry columns set, NaN stored as missing.

    Parameters
    ----------
    table
        Any table of n_row rows.
    columns
        From registry name to an array, list or Arrow array of n_row values.

    """
    names = table.schema.names
    named: dict[str, Any] = dict(zip(names, table.itercolumns(), strict=True))
    listed = dict(zip(names, table.schema, strict=True))
    for name, values in columns.items():
        listed[name] = registry_field(name)
        named[name] = as_arrow(values, listed[name].type)
    return pa.table(list(named.values()), schema=pa.schema(list(listed.values())))


def with_metadata(table: pa.Table, metadata: Mapping[str, Mapping[str, str]]) -> pa.Table:
    """Return ``table`` with entries added to the metadata of some of its columns."""
    fields = [
        field.with_metadata(
            {
                **(field.metadata or {}),
                **{key.encode(): text.encode() for key, text in metadata[field.name].items()},
            }
        )
        if field.name in metadata
        else field
        for field in table.schema
    ]
    return pa.table(list(table.itercolumns()), schema=pa.schema(fields))


def as_arrow(values: Any, kind: pa.DataType) -> pa.Array | pa.ChunkedArray:
    """Return ``values`` as an Arrow array of type ``kind``; NaN is missing."""
    if isinstance(values, pa.Array | pa.ChunkedArray):
        return values if values.type == kind else values.cast(kind)
    return pa.array(values, type=kind, from_pandas=True)


def cast_groups(table: pa.Table) -> NDArray[np.int64]:
    """Return a number per row, shape (n_row,), the same for the rows of one cast of one cruise.

    Numbers follow the order of first appearance.
    """
    keys = [table.column(name).combine_chunks() for name in ("expocode", "station", "cast")]
    joined = pc.binary_join_element_wise(*[pc.fill_null(k.cast(pa.string()), "") for k in keys], "\x1f")
    codes = joined.dictionary_encode()
    if isinstance(codes, pa.ChunkedArray):
        codes = codes.combine_chunks()
    return np.asarray(codes.indices.to_numpy(zero_copy_only=False), dtype=np.int64)


def findings_table(expocode: str | None, findings: Sequence[Finding]) -> pa.Table:
    """Return findings of one cruise as the table that the archive keeps."""
    return _records_table(FINDINGS, expocode, findings)


def rejects_table(expocode: str | None, rejects: Sequence[Reject]) -> pa.Table:
    """Return rejects of one cruise as the table that the archive keeps."""
    return _records_table(REJECTS, expocode, rejects)


def empty(names: Iterable[str]) -> pa.Table:
    """Return a table of no rows with the registry columns ``names``."""
    return pa.schema([registry_field(name) for name in names]).empty_table()


def _records_table(names: Sequence[str], expocode: str | None, records: Sequence[Any]) -> pa.Table:
    known = {f.name for f in fields(records[0])} if records else set()
    columns = {
        name: [getattr(record, name) for record in records] if name in known - {"expocode"} else None
        for name in names
    }
    columns["expocode"] = [expocode] * len(records)
    schema = pa.schema([registry_field(name) for name in names])
    return pa.table([pa.array(columns[f.name] or [], type=f.type) for f in schema], schema=schema)


def arranged(table: pa.Table) -> pa.Table:
    """Return the table with its registry columns in the registry's order, and all others behind them.

    A measured value, its delivered flag and our check flag stand side by side.
    """
    names = table.schema.names
    named = set(names)
    known = [name for name in REGISTRY if name in named and name not in _LEDGER]
    others = [name for name in names if name not in REGISTRY]
    return table.select([*known, *others, *(name for name in _LEDGER if name in named)])
