"""An Arrow table as a Parquet file: the same table and metadata give the same bytes.

What is switched on was chosen by measuring tables of one cruise (1,400 rows, 130 columns): dictionaries
only where values repeat, since building them for measured numbers costs most of the time of writing;
no compressor for flags, whose packed dictionaries it cannot shrink, nor for columns with no value.
"""

from __future__ import annotations

from typing import IO, TYPE_CHECKING, Any, Protocol

import pyarrow as pa
import pyarrow.parquet as pq

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

ROW_GROUP = 131_072  # rows
CODEC = "zstd"
LEVEL = 1
FLAG, TEXT = pa.int16(), pa.string()

# Columns by which analysts choose whole files; their least and greatest values stand in the footer.
CHOSEN_BY = ("expocode", "station", "date", "time", "latitude", "longitude", "pressure")


class LargeTable(Protocol):
    """A table that is too large to be held: it can be gone through, a few rows at a time."""

    @property
    def schema(self) -> pa.Schema:
        """Its columns."""

    @property
    def num_rows(self) -> int:
        """How many rows it has."""

    def is_missing(self, name: str) -> bool:
        """Return whether a column has no value in any row."""

    def batches(self, rows: int) -> Iterator[pa.Table]:
        """Yield its rows in their order, so many at a time and the rest."""


def write_table(table: pa.Table | LargeTable, metadata: Mapping[str, str], sink: IO[bytes] | Any) -> None:
    """Write ``table`` to ``sink`` as Parquet; of a large one no more than a row group is held.

    Parameters
    ----------
    table
        Columns and their order, types and field metadata are kept as they are.
    metadata
        Written as metadata of the file, in place of what ``table`` carries.
    sink
        A binary file open for writing, or what pyarrow takes as one.

    """
    schema = table.schema.with_metadata(dict(metadata))
    if isinstance(table, pa.Table):
        missing = [column.null_count == len(column) for column in table.itercolumns()]
        pq.write_table(
            table.replace_schema_metadata(dict(metadata)),
            sink,
            row_group_size=ROW_GROUP,
            **_options(schema, missing),
        )
        return
    missing = [table.is_missing(name) for name in schema.names]
    with pq.ParquetWriter(sink, schema, **_options(schema, missing)) as writer:
        for group in table.batches(ROW_GROUP):
            writer.write_table(group.replace_schema_metadata(schema.metadata), row_group_size=ROW_GROUP)


def _options(schema: pa.Schema, missing: Sequence[bool]) -> dict[str, Any]:
    """Return how each column is written; ``missing`` tells which of them have no value at all, (n_column,)."""
    plain = [empty or kind == FLAG for kind, empty in zip(schema.types, missing, strict=True)]
    codecs = {name: "none" if bare else CODEC for name, bare in zip(schema.names, plain, strict=True)}
    return {
        "compression": codecs,
        "compression_level": {name: LEVEL for name, codec in codecs.items() if codec == CODEC} or None,
        "use_dictionary": [
            name for name, kind in zip(schema.names, schema.types, strict=True) if kind in (FLAG, TEXT)
        ],
        "write_statistics": [name for name in CHOSEN_BY if name in schema.names],
        "write_page_checksum": True,
    }
