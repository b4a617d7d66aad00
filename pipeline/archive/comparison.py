"""Two revisions of one cruise beside each other: what differs, and what they were made from differently."""

from __future__ import annotations

from dataclasses import dataclass
from typing import IO, TYPE_CHECKING

import pyarrow as pa
import pyarrow.parquet as pq

from pipeline.archive import layout
from pipeline.archive.changes import TableChanges, compare_tables
from pipeline.archive.contents import read_table
from pipeline.archive.origins import OriginChanges, compare_origins
from pipeline.archive.provenance import RECORD, Provenance
from pipeline.archive.writing import write_table

if TYPE_CHECKING:
    from pathlib import Path

    from pipeline.archive.storage import Store

_LISTING = "changes"  # what the file of a listing says it holds

COMPARED = ("samples", "casts")


@dataclass(frozen=True, eq=False)
class RevisionChanges:
    """What differs between two revisions of a cruise."""

    before: Provenance
    after: Provenance
    origins: OriginChanges
    tables: tuple[TableChanges, ...]

    @property
    def listing(self) -> pa.Table:
        """Every delivered row, value and column that differs, as one table of the columns CHANGES."""
        return pa.concat_tables([one.listing for one in self.tables])


def compare_revisions(store: Store, expocode: str, before: int, after: int) -> RevisionChanges:
    """Return what differs between two revisions of a cruise.

    Raises
    ------
    ArchiveProblem
        If one of their tables is not there or is damaged.

    """
    compared, made = [], {}
    for table in COMPARED:
        revisions = {
            number: read_table(store, expocode, table, revision=number) for number in {before, after}
        }
        compared.append(compare_tables(table, revisions[before], revisions[after]))
        place = store.where(layout.table_key(table, expocode))
        made = {
            number: Provenance.from_metadata(read.schema.metadata, place)
            for number, read in revisions.items()
        }
    return RevisionChanges(
        made[before], made[after], compare_origins(store, made[before], made[after]), tuple(compared)
    )


def write_listing(found: RevisionChanges, sink: IO[bytes]) -> None:
    """Write the listing as Parquet; the metadata of the file say which revisions were compared."""
    told = {"table": _LISTING, "expocode": found.after.expocode}
    for side, made in (("from", found.before), ("to", found.after)):
        told |= {f"{side}_revision": str(made.revision), f"{side}_fingerprint": made.fingerprint}
    write_table(found.listing, {f"{RECORD}.{name}": text for name, text in told.items()}, sink)


def is_listing(path: Path) -> bool:
    """Return whether a file is one that ``write_listing`` wrote."""
    try:
        told = pq.read_metadata(path).metadata if path.is_file() else None
    except (pa.ArrowException, OSError):
        return False
    return (told or {}).get(f"{RECORD}.table".encode()) == _LISTING.encode()
