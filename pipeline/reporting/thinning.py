"""Fewer CTD levels than were delivered: as many as a line on a page can show."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.tables import cast_groups, floats

if TYPE_CHECKING:
    import pyarrow as pa
    from numpy.typing import NDArray

# Our choice, no source: more than the lines of a figure on a large screen, and few enough for a page.
MOST_OF_CAST = 200
MOST_OF_CRUISE = 40_000


def thinned(casts: pa.Table, most: int = MOST_OF_CRUISE, most_of_cast: int = MOST_OF_CAST) -> pa.Table:
    """Return the levels of a table that are drawn, in their order: of each cast as many as there is room for.

    They are evenly spread over the levels of the cast by pressure, its first and last among them.
    """
    if not casts.num_rows:
        return casts
    return casts.take(np.sort(_chosen(cast_groups(casts), floats(casts, "pressure"), most, most_of_cast)))


def _chosen(
    cast: NDArray[np.int64], pressure: NDArray[np.float64], most: int, most_of_cast: int
) -> NDArray[np.int64]:
    """Return row numbers, (n_chosen,)."""
    order = np.lexsort((pressure, cast))
    ends = np.flatnonzero(np.diff(cast[order])) + 1
    room = max(2, min(most_of_cast, most // (len(ends) + 1)))
    return np.concatenate(
        [
            group[np.unique(np.linspace(0, len(group) - 1, min(room, len(group))).round().astype(np.int64))]
            for group in np.split(order, ends)
        ]
    )
