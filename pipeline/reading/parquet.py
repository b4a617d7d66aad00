"""A Parquet table under a description to columns of cells: plain columns only, within what settings bear."""

from __future__ import annotations

import io
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet as pq

from pipeline.problems import DeliveryProblem
from pipeline.reading.cells import Cells
from pipeline.reading.headings import TableCells, named, refuse_cells, refuse_columns
from pipeline.reading.worksheet import row_text

if TYPE_CHECKING:
    from pipeline.settings import ReadingSettings

PARQUET_MAGIC = b"PAR1"
_BATCH = 65_536  # rows
_LARGEST_HEAD = 100_000_000  # bytes of text, and entries, in the file's footer
_EXACT = 2**53


def read_parquet(name: str, data: bytes, limits: ReadingSettings) -> TableCells:
    """Read a Parquet table.

    Raises
    ------
    DeliveryProblem
        Where the file is cut or spoiled, too large, or holds columns of columns.

    """
    try:
        table = _table(name, data, limits)
        columns = tuple(_cells(table.column(i)) for i in range(table.num_columns))
    except (pa.ArrowException, OSError, ValueError, KeyError, MemoryError, UnicodeError) as error:
        words = " ".join(str(error).split())[:160] or type(error).__name__
        raise DeliveryProblem(
            "broken-parquet",
            f"{name}: the Parquet file is cut or spoiled ({words}); ask for it to be sent again.",
        ) from error
    lines = np.arange(1, table.num_rows + 1, dtype=np.int64)
    return TableCells(
        name=name,
        names=named(table.column_names),
        units=tuple(_unit(field) for field in table.schema),
        cells=Cells(columns, lines, ()),
        raw=row_text(columns, lines),
    )


def _table(name: str, data: bytes, limits: ReadingSettings) -> pa.Table:
    """Return the table, its texts still coded; refused before it is read where it says that it is too large."""
    file = pq.ParquetFile(
        io.BytesIO(data),
        thrift_string_size_limit=_LARGEST_HEAD,
        thrift_container_size_limit=_LARGEST_HEAD,
        page_checksum_verification=True,
    )
    head, schema = file.metadata, file.schema_arrow
    refuse_columns(name, None, head.num_columns, limits)
    refuse_cells(name, head.num_rows * head.num_columns, limits)
    nested = [field.name for field in schema if pa.types.is_nested(field.type)]
    if nested:
        raise DeliveryProblem(
            "nested-columns",
            f"{name}: the columns {', '.join(nested)[:300]} hold columns or lists of their own; expected plain columns;"
            " deliver them apart or leave them out.",
        )
    _refuse_size(name, sum(head.row_group(i).total_byte_size for i in range(head.num_row_groups)), limits)
    batches: list[pa.RecordBatch] = []
    rows, size = 0, 0
    for batch in file.iter_batches(batch_size=_rows_at_once(file, limits), use_threads=False):
        rows += batch.num_rows
        size += batch.nbytes
        _refuse_size(name, size, limits)
        batches.append(batch)
    if rows != file.metadata.num_rows:
        raise ValueError(f"it says that it has {file.metadata.num_rows} rows, and has {rows}")
    table = pa.Table.from_batches(batches, file.schema_arrow)
    table.validate(full=True)
    return table


def _refuse_size(name: str, size: int, limits: ReadingSettings) -> None:
    if size > limits.unpacked_bytes:
        raise DeliveryProblem(
            "too-large",
            f"{name}: the table unpacks to at least {size} bytes; expected at most {limits.unpacked_bytes}; deliver it"
            " in several files, or raise reading.unpacked_bytes in the settings.",
        )


def _rows_at_once(file: pq.ParquetFile, limits: ReadingSettings) -> int:
    """Return how many rows can be unpacked together within what is borne.

    One text may stand in every row and be in the file once: no text is longer than all texts of its column.
    """
    head = file.metadata
    texts = [i for i, field in enumerate(file.schema_arrow) if not pa.types.is_primitive(field.type)]
    longest = max(
        (
            head.row_group(g).column(i).total_uncompressed_size
            for g in range(head.num_row_groups)
            for i in texts
        ),
        default=1,
    )
    return max(1, min(_BATCH, limits.unpacked_bytes // max(1, longest)))


def _unit(field: pa.Field) -> str:
    return str((field.metadata or {}).get(b"units", b"").decode("utf-8", errors="replace"))


def _cells(chunked: pa.ChunkedArray) -> pa.Array:
    """Return a column as float64, or as trimmed text; dates and instants as ISO text, in UTC."""
    column = chunked.combine_chunks()
    kind = column.type
    if pa.types.is_dictionary(kind):
        column = column.dictionary_decode()
        kind = column.type
    if pa.types.is_integer(kind):
        sizes = pc.abs(column.cast(pa.float64(), safe=False))
        exact = pc.all(pc.less_equal(sizes, float(_EXACT))).as_py()
        return (
            column.cast(pa.float64(), safe=False) if exact is not False else _text(column.cast(pa.string()))
        )
    if pa.types.is_floating(kind):
        return column.cast(pa.float64())
    if pa.types.is_decimal(kind):
        return column.cast(pa.string()).cast(pa.float64())
    if pa.types.is_timestamp(kind):
        return _text(_instants(column))
    if pa.types.is_date64(kind):
        return _text(column.cast(pa.date32()).cast(pa.string()))
    if pa.types.is_binary(kind) or pa.types.is_large_binary(kind) or pa.types.is_fixed_size_binary(kind):
        return _text(column.cast(pa.binary()).cast(pa.string()))
    return _text(column.cast(pa.string()))


def _instants(column: pa.Array) -> pa.Array:
    known = ~np.asarray(column.is_null().to_numpy(zero_copy_only=False), dtype=bool)
    whole = np.asarray(
        pc.fill_null(column.cast(pa.int64()), 0).to_numpy(zero_copy_only=False), dtype=np.int64
    )
    seconds = whole.astype(f"datetime64[{column.type.unit}]").astype("datetime64[s]")
    texts = np.datetime_as_string(seconds, unit="s")
    return pc.if_else(pa.array(known), pa.array(texts, pa.string()), pa.scalar("", pa.string()))


def _text(column: pa.Array) -> pa.Array:
    return pc.utf8_trim_whitespace(pc.fill_null(column, ""))
