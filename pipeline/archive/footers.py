"""What the footers of a cruise's files tell, without reading the tables."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import pyarrow as pa
import pyarrow.parquet as pq

from pipeline.archive import layout
from pipeline.archive.provenance import RECORD, Provenance
from pipeline.archive.refusals import is_of_storage, refused
from pipeline.archive.standing import Mark, Standing
from pipeline.problems import ArchiveProblem
from pipeline.tables import TABLE_NAMES

if TYPE_CHECKING:
    from pipeline.archive.storage import Store


@dataclass(frozen=True, slots=True)
class Footer:
    """Provenance and extent of one table's file."""

    provenance: Provenance
    table: str
    rows: int

    @property
    def mark(self) -> Mark:
        """What tells this publication from others."""
        return Mark(self.provenance.revision, self.provenance.fingerprint)


@dataclass(frozen=True, slots=True)
class Damaged:
    """A file that does not open as Parquet, and the sentence that says so."""

    sentence: str


def read_footer(store: Store, key: str) -> Footer | Damaged | None:
    """Return the footer of the file at ``key``, None where there is no file.

    Raises
    ------
    ArchiveProblem
        If it is not one of ours, was written by a later version, or cannot be read now.

    """
    place = store.where(key)
    with refused(place, "read"):
        try:
            found = pq.read_metadata(store.source(key))
        except FileNotFoundError:
            return None
        except pa.ArrowException as error:
            return _damaged(place, error)
        except OSError as error:
            if not is_of_storage(error):  # not the system's word but the decoder's
                return _damaged(place, error)
            raise
    metadata = found.metadata or {}
    table = metadata.get(f"{RECORD}.table".encode(), b"").decode(errors="replace")
    return Footer(Provenance.from_metadata(metadata, place), table, found.num_rows)


def read_published(store: Store, expocode: str, table: str) -> Footer | Damaged | None:
    """Return the footer of a published table, None where it is not published.

    Raises
    ------
    ArchiveProblem
        As ``read_footer``, and if the file holds another table or cruise, or other rows than were written.

    """
    place = store.where(layout.table_key(table, expocode))
    footer = read_footer(store, layout.table_key(table, expocode))
    if isinstance(footer, Footer):
        own = footer.provenance
        if (footer.table, own.expocode) != (table, expocode):
            raise ArchiveProblem(
                f"{place}: holds the {footer.table} of {own.expocode}, so a file was renamed or copied; "
                "move it out of the archive and run again."
            )
        if own.tables.get(table) != footer.rows:
            raise ArchiveProblem(
                f"{place}: has {footer.rows} rows, {own.tables.get(table)} were written, so it was changed; "
                "move it out of the archive and run again."
            )
    return footer


def observe(store: Store, expocode: str) -> Standing:
    """Return what of a cruise stands where.

    Raises
    ------
    ArchiveProblem
        If a file stands in the place of a table that must not be replaced, as ``read_published`` says.

    """
    published: dict[str, Mark | None] = {}
    for table in TABLE_NAMES:
        footer = read_published(store, expocode, table)
        if footer is not None:
            published[table] = footer.mark if isinstance(footer, Footer) else None
    superseded: dict[int, frozenset[str]] = {}
    for name in store.names(layout.superseded_key(expocode)):
        revision = layout.revision_of(name)
        if revision is not None:
            names = store.names(layout.superseded_key(expocode, revision))
            superseded[revision] = frozenset(t for t in TABLE_NAMES if f"{t}{layout.SUFFIX}" in names)
    return Standing(published, {revision: tables for revision, tables in superseded.items() if tables})


def _damaged(place: str, error: Exception) -> Damaged:
    said = str(error).partition("\n")[0].rstrip(". ")
    return Damaged(f"{place}: damaged, it does not open as Parquet ({said}); run again to make it anew.")
