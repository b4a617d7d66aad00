"""Which row of one revision is which row of another: by key, and where a key stands more than once, by order."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    IntArray = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Pairing:
    """Rows of two tables: those that are the same sample or level in both, and those that one alone has."""

    before: IntArray  # (n_pair,) rows of the earlier table, beside ``after``
    after: IntArray  # (n_pair,) rows of the later table, in ascending order
    gone: IntArray  # rows that only the earlier table has, in ascending order
    added: IntArray  # rows that only the later table has, in ascending order
    occurrence_before: IntArray  # which row of its key a row is, counted from 1
    occurrence_after: IntArray
    repeated_keys: int = 0  # keys that stand more than once in one of the tables: paired by their order
    casts_by_order: int = 0  # casts with new pressures throughout: their levels are paired by their order


def pair_samples(before: pa.Table, after: pa.Table) -> Pairing:
    """Pair samples by station, cast and sample number."""
    one, other = _codes(before, after, ("station", "cast", "sample"))
    return _paired(one, other)


def pair_levels(before: pa.Table, after: pa.Table) -> Pairing:
    """Pair CTD levels by station, cast and pressure.

    A cast that has as many levels as before and shares less than half of its pressures with them was given
    other pressures: its levels are paired by their order.
    """
    cast_before, cast_after = _codes(before, after, ("station", "cast"))
    one, other = _codes(before, after, ("station", "cast", "pressure"))
    pairing = _paired(one, other)
    n_cast = 1 + max(cast_before.max(initial=-1), cast_after.max(initial=-1))
    levels = np.bincount(cast_before, minlength=n_cast)
    kept = np.bincount(cast_after[pairing.after], minlength=n_cast)
    shifted = (levels > 0) & (levels == np.bincount(cast_after, minlength=n_cast)) & (2 * kept < levels)
    if not shifted.any():
        return pairing
    n_code = 1 + max(one.max(initial=-1), other.max(initial=-1))
    # all levels of such a cast get one key, so that their order decides
    one = np.where(shifted[cast_before], n_code + cast_before, one)
    other = np.where(shifted[cast_after], n_code + cast_after, other)
    again = _paired(one, other)
    alone = _repeated(one[~shifted[cast_before]], other[~shifted[cast_after]])
    occurrences = pairing.occurrence_before, pairing.occurrence_after
    return Pairing(
        again.before, again.after, again.gone, again.added, *occurrences, alone, int(shifted.sum())
    )


def _paired(before: IntArray, after: IntArray) -> Pairing:
    """Pair the rows of two arrays of keys, (n_before,) and (n_after,)."""
    place_before, place_after = _places(before), _places(after)
    most = 1 + max(place_before.max(initial=0), place_after.max(initial=0))
    one, other = before * most + place_before, after * most + place_after
    _, rows, others = np.intersect1d(one, other, assume_unique=True, return_indices=True)
    ascending = np.argsort(others)
    return Pairing(
        before=rows[ascending],
        after=others[ascending],
        gone=np.flatnonzero(~np.isin(one, other)),
        added=np.flatnonzero(~np.isin(other, one)),
        occurrence_before=place_before,
        occurrence_after=place_after,
        repeated_keys=_repeated(before, after),
    )


def _places(keys: IntArray) -> IntArray:
    """Return which of the rows of its key each row is, counted from 1, (n_row,)."""
    order = np.argsort(keys, kind="stable")
    ordered = keys[order]
    starts = np.flatnonzero(np.r_[True, ordered[1:] != ordered[:-1]]) if len(keys) else np.empty(0, np.int64)
    place = np.empty(len(keys), dtype=np.int64)
    place[order] = 1 + np.arange(len(keys)) - np.repeat(starts, np.diff(np.r_[starts, len(keys)]))
    return place


def _repeated(before: IntArray, after: IntArray) -> int:
    """Return how many keys stand more than once in one of two arrays."""
    twice = [keys[counts > 1] for keys, counts in (np.unique(k, return_counts=True) for k in (before, after))]
    return len(np.union1d(*twice))


def _codes(before: pa.Table, after: pa.Table, names: Sequence[str]) -> tuple[IntArray, IntArray]:
    """Return a number per row of each table, the same for rows that agree in the columns ``names``."""
    n_before = before.num_rows
    codes = np.zeros(n_before + after.num_rows, dtype=np.int64)
    for name in names:
        column = pa.chunked_array([*_chunks(before, name), *_chunks(after, name)], pa.string())
        own = pc.dictionary_encode(column, null_encoding="encode").combine_chunks().indices.to_numpy()
        _, codes = np.unique(codes * (1 + own.max(initial=0)) + own, return_inverse=True)
    return codes[:n_before], codes[n_before:]


def _chunks(table: pa.Table, name: str) -> list[pa.Array]:
    if name not in table.column_names:
        return [pa.nulls(table.num_rows, pa.string())]
    column = table.column(name)
    if pa.types.is_floating(column.type):
        column = pc.add(column, 0.0)  # of two zeros there is one key
    return list(column.cast(pa.string()).chunks)
