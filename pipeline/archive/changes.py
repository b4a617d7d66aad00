"""Which samples, levels and values differ between two revisions of a table. Pure: tables in, tables out."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.archive.cells import Cells, compare_cells, filled_cells
from pipeline.archive.listing import (
    FLAGS,
    Change,
    columns_listed,
    is_code,
    rows_listed,
    stacked,
    values_listed,
)
from pipeline.archive.pairing import Pairing, pair_levels, pair_samples
from pipeline.problems import BrokenPromise
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Mapping

    import pyarrow as pa
    from numpy.typing import NDArray

    IntArray = NDArray[np.int64]

_PAIRS = {"samples": pair_samples, "casts": pair_levels}
# They name the row, or say where in the file it stands, and are no values.
_NO_VALUES = frozenset({"expocode", "station", "cast", "sample", "file", "line"})
_COPY_SUFFIX = "_delivered"


@dataclass(frozen=True, slots=True)
class ColumnDifference:
    """How many values of one column differ, and the largest difference with its row."""

    name: str
    changed: int
    appeared: int
    vanished: int
    largest: float | None = None  # later less earlier, of the greatest size; None where nothing is a number
    at: Mapping[str, Any] | None = None  # station, cast, sample and pressure of it

    @property
    def count(self) -> int:
        """Values that differ."""
        return self.changed + self.appeared + self.vanished

    @property
    def unit(self) -> str:
        """The unit of a registry column."""
        return REGISTRY[self.name].unit if self.name in REGISTRY else ""


@dataclass(frozen=True, eq=False)
class TableChanges:
    """What differs between two revisions of the samples, or of the casts."""

    table: str
    rows_before: int
    rows_after: int
    pairing: Pairing
    delivered: tuple[ColumnDifference, ...]  # of the columns that were delivered, those that differ
    computed: tuple[ColumnDifference, ...]  # of all others
    columns_gone: Mapping[str, int]  # delivered columns that the later revision lacks, with their values
    columns_added: Mapping[str, int]
    computed_gone: tuple[str, ...]
    computed_added: tuple[str, ...]
    listing: pa.Table  # the columns CHANGES: a row per row, column and delivered value that differs

    @property
    def is_same(self) -> bool:
        """Whether nothing differs."""
        return not (self.listing.num_rows or self.computed or self.computed_gone or self.computed_added)


def compare_tables(table: str, before: pa.Table, after: pa.Table) -> TableChanges:
    """Return what differs between two revisions of a table.

    Values are compared to the last bit; missing and missing is no change. Of a quantity whose unit was converted
    the delivered numbers are compared, and what was made of them counts as computed.

    Parameters
    ----------
    table
        ``samples`` or ``casts``.
    before, after
        The earlier and the later revision of it.

    """
    if table not in _PAIRS:
        raise BrokenPromise(f"found the table '{table}', expected one of {', '.join(_PAIRS)}")
    pairing = _PAIRS[table](before, after)
    follows = _following(before, after)
    listed: list[tuple[str, Cells]] = []
    differences: dict[bool, list[ColumnDifference]] = {True: [], False: []}
    for name in (name for name in after.column_names if name in before.column_names):
        if name in _NO_VALUES:
            continue
        cells = compare_cells(before.column(name), after.column(name), pairing.before, pairing.after)
        if not len(cells.pairs):
            continue
        is_delivered = _is_delivered(name, follows)
        differences[is_delivered].append(_difference(name, cells, after, pairing))
        if is_delivered:
            listed.append((name, cells))
    gone, added = _only(before, after), _only(after, before)
    columns_gone = {name: filled_cells(before.column(name)) for name in gone if _is_delivered(name, follows)}
    columns_added = {name: filled_cells(after.column(name)) for name in added if _is_delivered(name, follows)}
    parts = [
        rows_listed(Change.GONE, before, pairing.gone, pairing.occurrence_before),
        rows_listed(Change.ADDED, after, pairing.added, pairing.occurrence_after),
        columns_listed(Change.COLUMN_GONE, "before", columns_gone),
        columns_listed(Change.COLUMN_ADDED, "after", columns_added),
        values_listed(before, after, pairing, listed),
    ]
    return TableChanges(
        table=table,
        rows_before=before.num_rows,
        rows_after=after.num_rows,
        pairing=pairing,
        delivered=tuple(differences[True]),
        computed=tuple(differences[False]),
        columns_gone=columns_gone,
        columns_added=columns_added,
        computed_gone=tuple(name for name in gone if name not in columns_gone),
        computed_added=tuple(name for name in added if name not in columns_added),
        listing=stacked(parts, table),
    )


def _is_delivered(name: str, follows: frozenset[str]) -> bool:
    """Return whether a column holds what was delivered, rather than what was made of it."""
    if name in follows:
        return False
    return name not in REGISTRY or bool(REGISTRY[name].exchange) or name in FLAGS


def _only(one: pa.Table, other: pa.Table) -> list[str]:
    return [name for name in one.column_names if name not in other.column_names and name not in _NO_VALUES]


def _following(before: pa.Table, after: pa.Table) -> frozenset[str]:
    """Return the columns that follow from another delivered one, so that a change is not told twice.

    Where both revisions were converted from the same unit that is the converted column; where from different
    ones it is the delivered numbers, which cannot be compared.
    """
    copies, units = _copies(before), _copies(after)
    follows = set()
    for name in copies.keys() & units.keys():
        (copy, unit), (other, other_unit) = copies[name], units[name]
        follows |= {name} if (copy, unit) == (other, other_unit) else {copy, other}
    return frozenset(follows)


def _copies(table: pa.Table) -> dict[str, tuple[str, str]]:
    """Return, by converted column, the column that holds its delivered numbers, and their unit."""
    beside = {_folded(name): name for name in table.column_names if name not in REGISTRY}
    found = {}
    for field in table.schema:
        told = field.metadata or {}
        if field.name not in REGISTRY or b"conversion" not in told:
            continue
        names = (told.get(b"delivered_name", b"").decode(), *REGISTRY[field.name].exchange)
        copy = next((beside[_folded(name)] for name in names if _folded(name) in beside), None)
        if copy is not None:
            found[field.name] = copy, told.get(b"delivered_units", b"").decode()
    return found


def _folded(name: str) -> str:
    return re.sub(r"[\s_-]", "", name.removesuffix(_COPY_SUFFIX)).upper()


def _difference(name: str, cells: Cells, after: pa.Table, pairing: Pairing) -> ColumnDifference:
    appeared, vanished = int(cells.appeared.sum()), int(cells.vanished.sum())
    largest, at = None, None
    if np.isfinite(cells.difference).any() and not is_code(name):
        most = int(np.nanargmax(np.where(np.isfinite(cells.difference), np.abs(cells.difference), np.nan)))
        largest = float(cells.difference[most])
        at = place(after, int(pairing.after[cells.pairs[most]]))
    return ColumnDifference(name, len(cells.pairs) - appeared - vanished, appeared, vanished, largest, at)


def place(table: pa.Table, row: int) -> dict[str, Any]:
    """Return station, cast, sample and pressure of a row, those that the table has."""
    names = ("station", "cast", "sample", "pressure")
    return {name: table.column(name)[row].as_py() for name in names if name in table.column_names}
