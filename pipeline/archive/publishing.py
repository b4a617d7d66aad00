"""Putting a cruise's five tables into the archive, as a new revision.

At every instant each published file opens, and the published tables of a cruise are of one revision:

1. what a killed run left of a new revision is removed;
2. the five new tables are written to the staging place and have reached the disk;
3. the old five are moved aside, one by one;
4. the new five are moved in, one by one.

A run killed at any point leaves a cruise with some tables absent, never mixed, and the next publication
starts from the last whole revision, so that it ends with the bytes of an undisturbed one.
"""

from __future__ import annotations

from contextlib import suppress
from dataclasses import replace
from functools import partial
from typing import TYPE_CHECKING

import pyarrow.compute as pc

from pipeline.archive import layout
from pipeline.archive.accounting import SOLVED, imbalances
from pipeline.archive.footers import Footer, observe, read_footer
from pipeline.archive.standing import Mark
from pipeline.archive.writing import write_table
from pipeline.problems import ArchiveBusy, ArchiveProblem, BrokenPromise
from pipeline.tables import TABLE_NAMES

if TYPE_CHECKING:
    from collections.abc import Mapping

    import pyarrow as pa

    from pipeline.archive.provenance import Provenance
    from pipeline.archive.standing import Standing
    from pipeline.archive.storage import Store
    from pipeline.archive.writing import LargeTable

PATIENCE = 60.0  # seconds to wait for another process that is publishing the same cruise


def publish(store: Store, provenance: Provenance, tables: Mapping[str, pa.Table | LargeTable]) -> int:
    """Publish the tables of a cruise and return their revision.

    Where the cruise is current with the same fingerprint nothing is written; where the last whole revision
    has it but was being moved aside by a killed run, it is put back.

    Parameters
    ----------
    store
        The archive.
    provenance
        Its ``revision`` and ``tables`` are set here.
    tables
        By name, all five.

    Raises
    ------
    ArchiveProblem
        If something cannot be read or written; what was published before is published still.
    BrokenPromise
        If a table is missing or its rows do not add up to what the provenance says of the delivered files.

    """
    filled = replace(provenance, tables=_counted(provenance, tables))
    expocode = provenance.expocode
    with store.hold(layout.held_key(expocode), PATIENCE, fleeting=True):
        standing = observe(store, expocode)
        if _is_last(store, expocode, standing, provenance.fingerprint):
            _restore(store, expocode, standing)
            return standing.last
        for table in standing.leftovers:
            store.remove(layout.table_key(table, expocode))
        filled = replace(filled, revision=standing.next)
        try:
            _stage(store, filled, tables)
            _exchange(store, expocode, standing)
        except ArchiveProblem:
            with suppress(ArchiveProblem):  # the first refusal is the one to tell
                if standing.is_undamaged:
                    _restore(store, expocode, observe(store, expocode))
            with suppress(ArchiveProblem):
                _unstage(store, expocode)
            raise
    return filled.revision


def clean_staging(store: Store) -> None:
    """Remove what dead runs left in the staging place. For a run that holds the archive, before it starts."""
    names = set(store.names(layout.STAGING))
    for name in names:
        expocode = layout.expocode_of(name.removesuffix(layout.HELD_SUFFIX))
        if name.endswith(layout.PART_SUFFIX):
            store.remove(f"{layout.STAGING}/{name}")
        elif expocode is not None:
            with suppress(ArchiveBusy), store.hold(layout.held_key(expocode), fleeting=True):
                _unstage(store, expocode)


def _counted(provenance: Provenance, tables: Mapping[str, pa.Table | LargeTable]) -> dict[str, int]:
    """Return rows by table, after checking that no delivered row was lost on the way."""
    if set(tables) != set(TABLE_NAMES):
        raise BrokenPromise(f"{provenance.expocode}: found tables {sorted(tables)}, expected {TABLE_NAMES}")
    counts = {name: tables[name].num_rows for name in TABLE_NAMES}
    files = provenance.deliveries
    accounts = [(f"{f.name}: rows", f.rows, f.kept + f.rejected + f.set_aside) for f in files]
    accounts += [
        ("samples", sum(f.kept for f in files if f.kind == "bottle"), counts["samples"]),
        ("casts", sum(f.kept for f in files if f.kind == "ctd"), counts["casts"]),
        ("rejects", sum(f.rejected for f in files), counts["rejects"]),
    ]
    for what, expected, found in accounts:
        if expected != found:
            raise BrokenPromise(f"{provenance.expocode}: {what}: found {found} rows, expected {expected}")
    for file in files:
        if file.account and (
            wrong := imbalances(file.account, file.rows - file.set_aside, file.kept, file.rejected)
        ):
            raise BrokenPromise(f"{provenance.expocode}: {file.name}: {'; '.join(wrong)}")
    _compare_resolved(provenance, tables["samples"])
    return counts


def _compare_resolved(provenance: Provenance, samples: pa.Table) -> None:
    """See that the samples are resolved that the files' accounts say are."""
    told = [file.account for file in provenance.deliveries if file.kind == "bottle"]
    if None in told or "mixing_status" not in samples.schema.names:
        return
    expected = sum(one.resolved for one in told if one)
    found = pc.sum(pc.equal(samples.column("mixing_status"), SOLVED)).as_py() or 0
    if expected != found:
        raise BrokenPromise(f"{provenance.expocode}: found {found} samples resolved, expected {expected}")


def _stage(store: Store, provenance: Provenance, tables: Mapping[str, pa.Table | LargeTable]) -> None:
    for name, metadata in provenance.metadata_of(TABLE_NAMES).items():
        fill = partial(write_table, tables[name], metadata)
        store.write(layout.staging_key(provenance.expocode, name), fill)


def _unstage(store: Store, expocode: str) -> None:
    for name in store.names(layout.staging_key(expocode)):
        store.remove(f"{layout.staging_key(expocode)}/{name}")


def _exchange(store: Store, expocode: str, standing: Standing) -> None:
    """Move the old tables aside, then the staged ones in."""
    for table, revision in standing.outgoing:
        store.move(layout.table_key(table, expocode), layout.superseded_key(expocode, revision, table))
    for table in standing.damaged:
        store.remove(layout.table_key(table, expocode))
    if standing.outgoing:
        # After a loss of power too, no new table may stand beside an old one.
        store.settle(TABLE_NAMES)
    for table in TABLE_NAMES:
        store.move(layout.staging_key(expocode, table), layout.table_key(table, expocode))


def _is_last(store: Store, expocode: str, standing: Standing, fingerprint: str) -> bool:
    """Return whether the last whole revision is what is wanted: it stands where it should or is put back."""
    if standing.last == 0 or not standing.is_undamaged:
        return False
    aside = standing.superseded.get(standing.last, frozenset())
    for table in TABLE_NAMES:
        if table in aside:
            footer = read_footer(store, layout.superseded_key(expocode, standing.last, table))
            mark = footer.mark if isinstance(footer, Footer) else None
        else:
            mark = standing.published[table]
        if mark != Mark(standing.last, fingerprint):
            return False
    return True


def _restore(store: Store, expocode: str, standing: Standing) -> None:
    """Put the last whole revision back into its place; write nothing where it stands there."""
    for table in standing.leftovers:
        store.remove(layout.table_key(table, expocode))
    aside = standing.superseded.get(standing.last, frozenset())
    for table in TABLE_NAMES:
        if table in aside:
            store.move(
                layout.superseded_key(expocode, standing.last, table), layout.table_key(table, expocode)
            )
