"""The values of one column in two revisions, row beside row: which differ, and by how much."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]
    BoolArray = NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class Cells:
    """The values of a column that differ between two revisions, n_change of them."""

    pairs: IntArray  # which pairs of rows, ascending
    appeared: BoolArray  # where there was none
    vanished: BoolArray  # where there is none any more
    difference: FloatArray  # later less earlier, NaN where either is no number


def compare_cells(
    before: pa.ChunkedArray, after: pa.ChunkedArray, rows_before: IntArray, rows_after: IntArray
) -> Cells:
    """Return the values that differ.

    Parameters
    ----------
    before, after
        The column in either revision, (n_before,) and (n_after,). Where one holds numbers and the other
        text, text that says the same number is the same.
    rows_before, rows_after
        Rows that belong together, (n_pair,) each.

    """
    if _is_number(before) or _is_number(after):
        one, other = _numbers(before)[rows_before], _numbers(after)[rows_after]
    else:
        one, other = np.full(len(rows_before), np.nan), np.full(len(rows_after), np.nan)
    if _is_number(before) and _is_number(after):
        differs = (one != other) & ~(np.isnan(one) & np.isnan(other))
    else:
        texts, others = as_texts(before, rows_before), as_texts(after, rows_after)
        differs = ~np.asarray(
            pc.equal(pc.fill_null(texts, ""), pc.fill_null(others, "")).to_numpy(zero_copy_only=False)
        ) | (_nulls(texts) != _nulls(others))
        differs &= ~(one == other)
    pairs = np.flatnonzero(differs)
    with np.errstate(invalid="ignore", over="ignore"):  # of infinite or absurd values
        difference = other[pairs] - one[pairs]
    return Cells(pairs, _missing(before)[rows_before[pairs]], _missing(after)[rows_after[pairs]], difference)


def filled_cells(column: pa.ChunkedArray) -> int:
    """Return how many values a column has."""
    return len(column) - int(pc.sum(pc.is_null(column, nan_is_null=True)).as_py() or 0)


def _is_number(column: pa.ChunkedArray) -> bool:
    return bool(pa.types.is_floating(column.type) or pa.types.is_integer(column.type))


def _numbers(column: pa.ChunkedArray) -> FloatArray:
    """Return a column as numbers, (n_row,), NaN where there is none."""
    if _is_number(column):
        return np.asarray(column.to_numpy(), dtype=np.float64)
    return np.array([_number(text) for text in column.cast(pa.string()).to_pylist()], dtype=np.float64)


def _number(text: str | None) -> float:
    try:
        return float(text) if text is not None else np.nan
    except ValueError:
        return np.nan


def as_texts(column: pa.ChunkedArray, rows: IntArray) -> pa.Array:
    """Return some values of a column as text, missing where there is none; of a number the shortest that is exact."""
    taken = column.take(pa.array(rows)).combine_chunks()
    if pa.types.is_floating(taken.type):
        taken = pc.if_else(pc.is_nan(taken), pa.scalar(None, taken.type), taken)
    return taken.cast(pa.string())


def _missing(column: pa.ChunkedArray) -> BoolArray:
    """Return where a column has no value, (n_row,)."""
    return np.asarray(pc.is_null(column, nan_is_null=True).to_numpy(), dtype=bool)


def _nulls(values: pa.Array) -> BoolArray:
    return np.asarray(pc.is_null(values).to_numpy(zero_copy_only=False), dtype=bool)
