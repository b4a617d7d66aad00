"""The table of what differs between two revisions: a row per row, column or delivered value."""

from __future__ import annotations

from enum import StrEnum
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa

from pipeline.archive.cells import as_texts
from pipeline.tables import CHANGES, registry_field
from pipeline.variables import BASE, REGISTRY, Kind, flag_name

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.archive.cells import Cells
    from pipeline.archive.pairing import Pairing

    IntArray = NDArray[np.int64]

FLAGS = frozenset(flag_name(variable.name) for variable in BASE if variable.flags)  # as delivered
_PLACE = ("expocode", "station", "cast", "sample", "pressure", "file", "line")


class Change(StrEnum):
    """What happened to a row, a value or a column."""

    GONE = "gone"
    ADDED = "added"
    COLUMN_GONE = "column-gone"
    COLUMN_ADDED = "column-added"
    VALUE = "value"
    FLAG = "flag"
    APPEARED = "appeared"  # a value where there was none
    VANISHED = "vanished"  # none where there was one


_CHANGES = list(Change)


def is_code(name: str) -> bool:
    """Return whether the numbers of a column are flags, of which there is no difference."""
    return name in REGISTRY and REGISTRY[name].kind is Kind.FLAG


def rows_listed(change: Change, table: pa.Table, rows: IntArray, occurrence: IntArray) -> dict[str, Any]:
    """Return the columns of a listing for rows that one revision alone has.

    Parameters
    ----------
    change
        What happened to them.
    table
        The revision that has them, n_row.
    rows
        Which they are.
    occurrence
        Which row of its key each row is, (n_row,).

    """
    place = {name: table.column(name).take(pa.array(rows)) for name in _PLACE if name in table.column_names}
    return {**place, "occurrence": occurrence[rows], "change": pa.repeat(pa.scalar(change.value), len(rows))}


def columns_listed(change: Change, side: str, counts: Mapping[str, int]) -> dict[str, Any]:
    """Return the columns of a listing for columns, with their values, that one revision alone has."""
    return {
        "change": [change.value] * len(counts),
        "variable": list(counts),
        side: [f"{count} value{'s' if count != 1 else ''}" for count in counts.values()],
    }


def values_listed(
    before: pa.Table, after: pa.Table, pairing: Pairing, listed: Sequence[tuple[str, Cells]]
) -> dict[str, Any]:
    """Return the columns of a listing for values that differ, in the order of rows and columns.

    Parameters
    ----------
    before, after
        The two revisions.
    pairing
        Which of their rows belong together.
    listed
        Columns with the values that differ.

    """
    if not listed:
        return {"change": []}
    pairs = np.concatenate([cells.pairs for _, cells in listed])
    column = np.repeat(np.arange(len(listed), dtype=np.int32), [len(cells.pairs) for _, cells in listed])
    order = np.lexsort((column, pairs))
    taken = pa.array(order)
    texts = {
        side: pa.concat_arrays(
            [as_texts(table.column(name), rows[cells.pairs]) for name, cells in listed]
        ).take(taken)
        for side, table, rows in (("before", before, pairing.before), ("after", after, pairing.after))
    }
    kinds = np.concatenate([_kinds(name, cells) for name, cells in listed])[order]
    return {
        **rows_listed(Change.VALUE, after, pairing.after[pairs[order]], pairing.occurrence_after),
        "change": pa.array([change.value for change in _CHANGES]).take(pa.array(kinds)),
        "variable": pa.array([name for name, _ in listed]).take(pa.array(column[order])),
        **texts,
        "difference": np.concatenate(
            [
                np.full(len(cells.pairs), np.nan) if is_code(name) else cells.difference
                for name, cells in listed
            ]
        )[order],
    }


def stacked(parts: Iterable[Mapping[str, Any]], table: str) -> pa.Table:
    """Return parts of a listing of one table of the archive, one above the other."""
    fields = pa.schema([registry_field(name) for name in CHANGES])
    return pa.concat_tables([fields.empty_table(), *(_listing(part, fields, table) for part in parts)])


def _kinds(name: str, cells: Cells) -> NDArray[np.int8]:
    """Return what happened to each value, by its place in ``_CHANGES``, (n_change,)."""
    if name in FLAGS:
        return np.full(len(cells.pairs), _CHANGES.index(Change.FLAG), dtype=np.int8)
    kinds = np.full(len(cells.pairs), _CHANGES.index(Change.VALUE), dtype=np.int8)
    kinds[cells.appeared] = _CHANGES.index(Change.APPEARED)
    kinds[cells.vanished] = _CHANGES.index(Change.VANISHED)
    return kinds


def _listing(part: Mapping[str, Any], fields: pa.Schema, table: str) -> pa.Table:
    """Return columns as a table; those that are not given are missing."""
    n_row = len(part["change"])
    given = {**part, "table": pa.repeat(pa.scalar(table), n_row)}
    arrays = []
    for field in fields:
        values = given.get(field.name)
        if values is None:
            arrays.append(pa.nulls(n_row, field.type))
        elif isinstance(values, pa.ChunkedArray | pa.Array):
            arrays.append(values.cast(field.type))
        else:
            arrays.append(pa.array(values, type=field.type, from_pandas=True))
    return pa.table(arrays, schema=fields)
