"""Tables put aside on this machine's disk while a large cruise is made, and read back a part at a time.

The files have no names, so that nothing is left of them however the process ends.
"""

from __future__ import annotations

import tempfile
from contextlib import contextmanager
from typing import IO, TYPE_CHECKING, Any

import pyarrow as pa

from pipeline.problems import ArchiveProblem

if TYPE_CHECKING:
    from collections.abc import Iterator

_OPTIONS = pa.ipc.IpcWriteOptions(compression="lz4")
_ROWS = 32_768  # of a part that is read back at a time


class _Aside:
    """Tables in a file, one behind the other."""

    def __init__(self) -> None:
        with _told():
            self._file: IO[bytes] = tempfile.TemporaryFile(prefix="seawhence-")  # noqa: SIM115 - closed by close
        self._places: list[int] = []
        self.num_rows = 0

    def close(self) -> None:
        """Give the disk back."""
        self._file.close()

    def _put(self, table: pa.Table) -> None:
        with _told():
            self._places.append(self._file.seek(0, 2))
            with pa.ipc.new_stream(self._file, table.schema, options=_OPTIONS) as writer:
                writer.write_table(table, max_chunksize=_ROWS)
        self.num_rows += table.num_rows

    def _parts(self) -> Iterator[Any]:
        """Yield the tables in their order, each a few rows at a time, to be read before the next."""
        for place in self._places:
            with _told():
                self._file.seek(place)
                with pa.ipc.open_stream(self._file) as reader:
                    yield reader


class Casts(_Aside):
    """CTD casts as they were read, each a table with columns of its own."""

    def __init__(self) -> None:
        super().__init__()
        self.columns: list[pa.Table] = []  # tables without rows, the first of each kind

    def add(self, table: pa.Table) -> None:
        """Put a cast aside."""
        self._put(table)
        if not any(table.schema.equals(known.schema, check_metadata=True) for known in self.columns):
            self.columns.append(table.slice(0, 0))

    def __iter__(self) -> Iterator[pa.Table]:
        """Yield the casts in their order."""
        for reader in self._parts():
            yield reader.read_all()


class Kept(_Aside):
    """Described rows, tables of the same columns: what the archive writes as one large table."""

    def __init__(self) -> None:
        super().__init__()
        self._present: set[str] = set()
        self._schema: pa.Schema | None = None

    def add(self, table: pa.Table) -> None:
        """Put a block of rows aside."""
        self._schema = self._schema or table.schema
        self._put(table)
        self._present |= {
            name
            for name, column in zip(table.schema.names, table.itercolumns(), strict=True)
            if column.null_count < table.num_rows
        }

    @property
    def schema(self) -> pa.Schema:
        """The columns of all blocks."""
        return self._schema or pa.schema([])

    def is_missing(self, name: str) -> bool:
        """Return whether a column has no value in any row."""
        return name not in self._present

    def batches(self, rows: int) -> Iterator[pa.Table]:
        """Yield the rows in their order, so many at a time and the rest."""
        waiting: list[pa.RecordBatch] = []
        count = 0
        for batch in (batch for reader in self._parts() for batch in reader):
            waiting.append(batch)
            count += batch.num_rows
            if count >= rows:
                table = pa.Table.from_batches(waiting)
                yield table.slice(0, rows).combine_chunks()
                waiting, count = table.slice(rows).to_batches(), count - rows
        if count:
            yield pa.Table.from_batches(waiting).combine_chunks()


@contextmanager
def _told() -> Iterator[None]:
    """Turn what the system says of the disk into a sentence."""
    try:
        yield
    except OSError as error:
        raise ArchiveProblem(
            f"{tempfile.gettempdir()}: a large cruise cannot be put aside here, {error.strerror or error}; free space,"
            " or name another disk as TMPDIR, and run again."
        ) from error
