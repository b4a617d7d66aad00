"""The one salinity and the one oxygen that downstream work uses, and where each came from."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from pipeline.usable import Rows

# Working column: what it is chosen from, the first usable one taken.
CHOICES: dict[str, tuple[tuple[str, str], ...]] = {
    "practical_salinity": (("bottle_salinity", "bottle"), ("ctd_salinity", "ctd")),
    "oxygen": (("bottle_oxygen", "bottle"), ("ctd_oxygen", "ctd")),
}


def working_columns(data: Rows) -> dict[str, Any]:
    """Return each working column and its ``_source`` column, from name to values of shape (n_row,).

    The bottle's value is taken where it may be used, else the CTD's, else none.
    """
    columns: dict[str, Any] = {}
    for name, candidates in CHOICES.items():
        chosen = np.full(len(data), np.nan)
        source = np.full(len(data), None, dtype=object)
        for measured, word in candidates:
            values = data.usable(measured)
            take = np.isnan(chosen) & ~np.isnan(values)
            chosen[take] = values[take]
            source[take] = word
        columns[name] = chosen
        columns[f"{name}_source"] = source
    return columns
