"""Whether what an archive holds is what was put into it: every kept byte hashed again, every table read."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from pipeline.archive import layout, vault
from pipeline.archive.contents import read_through
from pipeline.archive.footers import Footer, read_footer
from pipeline.problems import ArchiveProblem
from pipeline.tables import TABLE_NAMES

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator

    from pipeline.archive.contents import Contents
    from pipeline.archive.provenance import Provenance
    from pipeline.archive.storage import Store


@dataclass(frozen=True, slots=True)
class Verified:
    """What was looked at, and a sentence for each thing that is not as it should be."""

    deliveries: int  # files under raw/ that are what their name says
    tables: int  # tables of all revisions that can be read
    troubles: tuple[str, ...]
    strangers: tuple[str, ...] = ()  # files under raw/ that are no delivery


def verify(store: Store, contents: Contents, cruise: str | None = None) -> Verified:
    """Hash every kept file again and read every table of every revision.

    Parameters
    ----------
    store, contents
        The archive. What is wrong with published tables as a whole stands in ``contents`` already.
    cruise
        Only what this cruise was made from, and its tables; all of the archive without it.

    """
    troubles: list[str] = []
    strangers: list[str] = []
    codes = list(contents.cruises) if cruise is None else [cruise]
    for expocode in codes:
        troubles += _lost_revisions(store, contents, expocode)
    made: list[Provenance] = []
    tables = 0
    for expocode in codes:
        for key, revision, table in _places(store, expocode):
            try:
                footer = read_footer(store, key)
                if isinstance(footer, Footer):
                    made.append(footer.provenance)
                    troubles += _differing(store.where(key), footer, revision, table, expocode)
                    read_through(store, expocode, table, revision=revision)
                    tables += 1
                elif footer is not None and revision is not None:
                    troubles.append(
                        f"{store.where(key)}: damaged, this earlier revision cannot be read any more."
                    )
            except ArchiveProblem as problem:
                troubles.append(str(problem))
    wanted = _wanted(made)
    kept = list(_kept(store, strangers)) if cruise is None else []
    good = 0
    for sha256 in dict.fromkeys([*wanted, *kept]):
        trouble = _of_bytes(store, sha256, wanted.get(sha256))
        good += trouble is None
        troubles += [trouble] if trouble else []
    known = {sentence for one in contents.cruises.values() for sentence in one.troubles}
    news = tuple(sentence for sentence in dict.fromkeys(troubles) if sentence not in known)
    return Verified(good, tables, news, tuple(strangers))


def _lost_revisions(store: Store, contents: Contents, expocode: str) -> Iterator[str]:
    """Yield a sentence for each table of an earlier revision that is no longer there."""
    made = contents.cruises[expocode].provenance
    for revision in range(1, made.revision if made else 1):
        for table in TABLE_NAMES:
            key = layout.superseded_key(expocode, revision, table)
            if store.size(key) is None:
                yield (
                    f"{store.where(key)}: the {table} of revision {revision} are no longer there; no run makes an"
                    " earlier revision again; put the file back from a copy."
                )


def _places(store: Store, expocode: str) -> Iterator[tuple[str, int | None, str]]:
    """Yield where the tables of a cruise lie, with their revision, None for what is published."""
    for table in TABLE_NAMES:
        yield layout.table_key(table, expocode), None, table
    for name in store.names(layout.superseded_key(expocode)):
        revision = layout.revision_of(name)
        if revision is not None:
            for table in TABLE_NAMES:
                yield layout.superseded_key(expocode, revision, table), revision, table


def _differing(place: str, footer: Footer, revision: int | None, table: str, expocode: str) -> Iterator[str]:
    """Yield in a sentence where an earlier revision's file is not the one that was put there."""
    own = footer.provenance
    if revision is None:
        return  # of published tables the contents tell this
    if (own.revision, footer.table, own.expocode) != (revision, table, expocode):
        yield (
            f"{place}: holds the {footer.table} of {own.expocode}, revision {own.revision}; expected revision "
            f"{revision} of {expocode}; a file was renamed or copied; move it out of the archive."
        )
    elif own.tables.get(table) != footer.rows:
        yield (
            f"{place}: has {footer.rows} rows, {own.tables.get(table)} were written, so it was changed; move it out of "
            "the archive."
        )


def _wanted(made: Iterable[Provenance]) -> dict[str, str]:
    """Return by SHA-256 what kept files tables were made from, in words."""
    wanted: dict[str, str] = {}
    for one in made:
        said = f"{one.expocode}, revision {one.revision}"
        for file in one.deliveries:
            wanted.setdefault(file.sha256, f"the delivered file {file.name} of {said}")
            if file.described_by:
                wanted.setdefault(file.described_by, f"the description of {file.name} of {said}")
        wanted.setdefault(one.settings_sha256, f"the settings of {said}")
        if one.catalogue_sha256 is not None:
            wanted.setdefault(one.catalogue_sha256, f"the source waters of {said}")
    return wanted


def _kept(store: Store, strangers: list[str]) -> Iterator[str]:
    """Yield the SHA-256 of every kept file by its name; what is no such name is put into ``strangers``."""
    for folder in store.names(layout.RAW):
        try:
            names = store.names(f"{layout.RAW}/{folder}")
        except ArchiveProblem:  # a file where folders are expected
            strangers.append(f"{layout.RAW}/{folder}")
            continue
        for name in names:
            if layout.is_raw(folder, name):
                yield name
            else:
                strangers.append(f"{layout.RAW}/{folder}/{name}")


def _of_bytes(store: Store, sha256: str, what: str | None) -> str | None:
    """Return what is wrong with kept bytes, None where nothing is."""
    place = store.where(layout.raw_key(sha256))
    if store.size(layout.raw_key(sha256)) is None:
        gone = f"{place}: {what or 'a kept file'} is no longer there"
        return f"{gone}; put it back from a copy, or run again with the file in the inbox."
    try:
        vault.read(store, sha256)
    except ArchiveProblem as problem:
        return f"{problem} It is {what}." if what else str(problem)
    return None
