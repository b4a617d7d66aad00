"""Rows of a table as profiles: which rows are of one cast, and what every cast has one of."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa

from pipeline.tables import cast_groups, texts

if TYPE_CHECKING:
    from numpy.typing import NDArray

    IntArray = NDArray[np.int64]
    FloatArray = NDArray[np.float64]

# What a cast has one of, as far as it is the same in all its rows.
OF_A_CAST = ("section", "station", "cast", "date", "time", "latitude", "longitude", "bottom_depth")
SHARES = ("share", "share_uncertainty", "share_p16", "share_p50", "share_p84")
_KEYS = ("station", "cast", "sample", "line")


@dataclass(frozen=True, eq=False)
class Profiles:
    """A table whose rows lie cast by cast."""

    table: pa.Table  # n_obs rows
    sizes: IntArray  # (n_profile,)
    names: tuple[str, ...]  # of the profiles, each once
    constant: frozenset[str]  # columns of ``OF_A_CAST`` that are the same in all rows of each cast

    @property
    def firsts(self) -> IntArray:
        """The first row of every profile, (n_profile,)."""
        return np.concatenate([[0], np.cumsum(self.sizes)[:-1]]).astype(np.int64)


def as_profiles(table: pa.Table) -> Profiles:
    """Return the rows cast by cast, casts and the rows of each in the order of the table."""
    casts = cast_groups(table)
    order = np.argsort(casts, kind="stable")
    table = table.take(pa.array(order))
    sizes = np.bincount(casts)
    of_row = casts[order]
    profiles = Profiles(table, sizes, (), frozenset())
    firsts = profiles.firsts
    station, cast = (texts(table, name) for name in ("station", "cast"))
    names = tuple(f"{station[row] or ''}/{cast[row] or ''}" for row in firsts)
    constant = []
    for name in OF_A_CAST:
        if name in table.column_names:
            codes = _codes(table.column(name))
            if (codes == codes[firsts][of_row]).all():
                constant.append(name)
    return Profiles(table, sizes, names, frozenset(constant))


def _codes(column: pa.ChunkedArray) -> IntArray:
    """Return a number per row that is the same for equal values and for missing ones."""
    coded = column.combine_chunks().dictionary_encode(null_encoding="encode")
    coded = coded.combine_chunks() if isinstance(coded, pa.ChunkedArray) else coded
    return np.asarray(coded.indices.to_numpy(zero_copy_only=False), dtype=np.int64)


def share_arrays(samples: pa.Table, mixtures: pa.Table) -> tuple[tuple[str, ...], dict[str, FloatArray]]:
    """Return the sources of a cruise and its shares by source, (n_obs, n_source) each, NaN where there is none.

    Parameters
    ----------
    samples, mixtures
        Both tables of a cruise, n_obs rows of samples.

    """
    sources = tuple(dict.fromkeys(name or "" for name in texts(mixtures, "source")))
    place = {key: row for row, key in enumerate(_keys(samples))}
    rows = np.array([place[key] for key in _keys(mixtures)], dtype=np.int64)
    at = np.array([sources.index(name or "") for name in texts(mixtures, "source")], dtype=np.int64)
    arrays = {}
    for name in SHARES:
        values = np.full((samples.num_rows, len(sources)), np.nan)
        values[rows, at] = np.asarray(mixtures.column(name).to_numpy(), dtype=np.float64)
        arrays[name] = values
    return sources, arrays


def _keys(table: pa.Table) -> list[tuple[Any, ...]]:
    return list(zip(*(table.column(name).to_pylist() for name in _KEYS), strict=True))
