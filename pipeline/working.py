"""The one salinity and the one oxygen that downstream work uses, and where each came from."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.usable import usable

if TYPE_CHECKING:
    import pyarrow as pa

    from pipeline.settings import UseSettings

# Working column: what it is chosen from, the first usable one taken.
CHOICES: dict[str, tuple[tuple[str, str], ...]] = {
    "practical_salinity": (("bottle_salinity", "bottle"), ("ctd_salinity", "ctd")),
    "oxygen": (("bottle_oxygen", "bottle"), ("ctd_oxygen", "ctd")),
}


def working_columns(table: pa.Table, use: UseSettings) -> dict[str, Any]:
    """Return each working column and its ``_source`` column, from name to values of shape (n_row,).

    The bottle's value is taken where it may be used, else the CTD's, else none.
    """
    columns: dict[str, Any] = {}
    for name, candidates in CHOICES.items():
        chosen = np.full(table.num_rows, np.nan)
        source = np.full(table.num_rows, None, dtype=object)
        for measured, word in candidates:
            values = usable(table, measured, use)
            take = np.isnan(chosen) & ~np.isnan(values)
            chosen[take] = values[take]
            source[take] = word
        columns[name] = chosen
        columns[f"{name}_source"] = source
    return columns
