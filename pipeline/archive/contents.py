"""What is in an archive, told from the footers of its tables, and the reading of one table."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from dataclasses import dataclass, field
from functools import partial
from typing import TYPE_CHECKING, Any

import pyarrow as pa
import pyarrow.parquet as pq

from pipeline.archive import layout
from pipeline.archive.footers import Footer, observe, read_footer, read_published
from pipeline.archive.refusals import is_of_storage, refused
from pipeline.problems import ArchiveProblem
from pipeline.tables import TABLE_NAMES

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    from pipeline.archive.provenance import Provenance
    from pipeline.archive.storage import Store

_ROWS = 65_536  # of a table that are read at a time where it need not be held


@dataclass(frozen=True, slots=True)
class CruiseContents:
    """One cruise as published: its provenance and row counts, and in words what is wrong with it."""

    expocode: str
    provenance: Provenance | None  # of its latest table that opens
    rows: Mapping[str, int]  # by table, of those that open
    troubles: tuple[str, ...] = ()  # one sentence each; none for a whole cruise

    @property
    def is_whole(self) -> bool:
        """Whether all five tables open and are of one publication."""
        return not self.troubles

    @property
    def fingerprint(self) -> str | None:
        """What the published tables were made from, None where they are not whole."""
        return self.provenance.fingerprint if self.provenance and self.is_whole else None


@dataclass(frozen=True, slots=True)
class Contents:
    """All cruises of an archive, and files in its tables' directories that are no cruise's."""

    cruises: Mapping[str, CruiseContents]
    strangers: tuple[str, ...] = field(default=())

    def cruises_by_content(self) -> dict[str, tuple[str, ...]]:
        """Return, for the content (``content_of``) of every file delivered, the cruises that it went into."""
        found: dict[str, dict[str, None]] = {}
        for expocode, cruise in self.cruises.items():
            for file in cruise.provenance.deliveries if cruise.provenance else ():
                found.setdefault(file.content, {})[expocode] = None
        return {content: tuple(expocodes) for content, expocodes in found.items()}

    def delivered_with(self, content: str) -> tuple[str, ...]:
        """Return the cruises that a file of this content went into."""
        return self.cruises_by_content().get(content, ())


def read_contents(store: Store) -> Contents:
    """Read what is in the archive; a cruise that is damaged is told in its own entry and hurts no other.

    Raises
    ------
    ArchiveProblem
        If the archive's directories cannot be read.

    """
    expocodes: set[str] = set()
    strangers: list[str] = []
    for table in TABLE_NAMES:
        found, others = layout.cruises_in(store.names(table))
        expocodes.update(found)
        strangers.extend(f"{table}/{name}" for name in others)
    # A cruise whose publication was cut short may have earlier revisions only.
    aside = (layout.expocode_of(name) for name in store.names(layout.SUPERSEDED))
    expocodes.update(expocode for expocode in aside if expocode is not None)
    in_order = sorted(expocodes)
    if store.width == 1:
        read = [read_cruise(store, expocode) for expocode in in_order]
    else:
        with ThreadPoolExecutor(store.width) as pool:
            read = list(pool.map(partial(read_cruise, store), in_order))
    return Contents(dict(zip(in_order, read, strict=True)), tuple(strangers))


def read_cruise(store: Store, expocode: str) -> CruiseContents:
    """Read what is published of one cruise; one that the archive does not have has five tables missing."""
    footers: dict[str, Footer] = {}
    missing: list[str] = []
    troubles: list[str] = []
    for table in TABLE_NAMES:
        try:
            footer = read_published(store, expocode, table)
        except ArchiveProblem as problem:
            troubles.append(str(problem))
            continue
        if footer is None:
            missing.append(table)
        elif not isinstance(footer, Footer):
            troubles.append(footer.sentence)
        else:
            footers[table] = footer
    if missing:
        troubles.append(
            f"{expocode}: no table of {', '.join(missing)} is published: a run was cut short or files were "
            "removed; run again to make them anew."
        )
    revisions = sorted({footer.mark.revision for footer in footers.values()})
    if len({footer.mark for footer in footers.values()}) > 1:
        troubles.append(
            f"{expocode}: its tables are not of one publication (revisions {', '.join(map(str, revisions))}), "
            "so files were put in from elsewhere; run again to make them anew."
        )
    latest = max(footers.values(), key=lambda footer: footer.mark.revision, default=None)
    rows = {table: footer.rows for table, footer in footers.items()}
    return CruiseContents(expocode, latest.provenance if latest else None, rows, tuple(troubles))


def revisions(store: Store, expocode: str) -> tuple[int, ...]:
    """Return the whole revisions of a cruise that can be read, the published one last."""
    standing = observe(store, expocode)
    aside = {number for number, tables in standing.superseded.items() if tables == set(TABLE_NAMES)}
    current = {standing.current.revision} if standing.current else set()
    return (*sorted(aside - current), *current)


def read_table(
    store: Store,
    expocode: str,
    table: str,
    *,
    revision: int | None = None,
    columns: Sequence[str] | None = None,
) -> pa.Table:
    """Read one table of a cruise.

    Parameters
    ----------
    store, expocode, table
        Which one.
    revision
        The published one by default, or an earlier one.
    columns
        All by default.

    Raises
    ------
    ArchiveProblem
        If it is not there or is damaged; pages are compared with their checksums.

    """
    with _opened(store, expocode, table, revision) as file:
        return file.read(columns=None if columns is None else list(columns))


def read_through(store: Store, expocode: str, table: str, *, revision: int | None = None) -> None:
    """Read one table of a cruise to its end, a few rows at a time, to see that it can be.

    Raises
    ------
    ArchiveProblem
        As ``read_table``.

    """
    with _opened(store, expocode, table, revision) as file:
        for _ in file.iter_batches(_ROWS):
            pass


@contextmanager
def _opened(store: Store, expocode: str, table: str, revision: int | None) -> Iterator[pq.ParquetFile]:
    key = _key(store, expocode, table, revision)
    place = store.where(key)
    with refused(place, "read"):
        try:
            source = store.source(key)
            # What a disk reads in many small steps would be as many requests elsewhere.
            ahead = not isinstance(source, str)
            with pq.ParquetFile(source, page_checksum_verification=True, pre_buffer=ahead) as file:
                yield file
        except FileNotFoundError as error:
            raise ArchiveProblem(
                f"{place}: the archive has no {table} of {expocode}"
                f"{'' if revision is None else f' in revision {revision}'}; 'seawhence show' lists what it has."
            ) from error
        except pa.ArrowException as error:
            raise _spoiled(place, error, earlier=layout.is_superseded(key)) from error
        except OSError as error:
            if not is_of_storage(error):  # not the system's word but the decoder's
                raise _spoiled(place, error, earlier=layout.is_superseded(key)) from error
            raise


def _key(store: Store, expocode: str, table: str, revision: int | None) -> str:
    key = layout.table_key(table, expocode)
    if revision is None:
        return key
    footer = read_footer(store, key)
    if isinstance(footer, Footer) and footer.mark.revision == revision:
        return key
    return layout.superseded_key(expocode, revision, table)


def _spoiled(place: str, error: Any, *, earlier: bool) -> ArchiveProblem:
    said = str(error).partition("\n")[0].rstrip(". ")
    remedy = (
        "no run makes an earlier revision again; put it back from a copy"
        if earlier
        else "remove it and run again to make it anew"
    )
    return ArchiveProblem(f"{place}: damaged, it cannot be read ({said}); {remedy}.")
