"""Which values downstream work may use: decided by the delivered flags and by our own check flags."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.tables import floats
from pipeline.variables import MEASURED, REGISTRY, FlagScheme, check_name, flag_name

if TYPE_CHECKING:
    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.settings import UseSettings

# IODE primary flags, IOC Manuals and Guides 54, vol. 3 (2013): what our own check columns hold.
CHECK_GOOD, CHECK_NOT_DONE, CHECK_DOUBT, CHECK_FAULT, CHECK_MISSING = 1, 2, 3, 4, 9


def usable(table: pa.Table, name: str, use: UseSettings) -> NDArray[np.float64]:
    """Return the values of ``name`` that may be used, shape (n_row,), NaN for all others.

    A derived column is usable as it is: it was computed from usable values only.
    """
    values = floats(table, name)
    if name in MEASURED:
        return np.where(may_use(table, name, use), values, np.nan)
    return values


def may_use(table: pa.Table, name: str, use: UseSettings) -> NDArray[np.bool_]:
    """Return where the delivered flags and our checks let a measured value be used, shape (n_row,)."""
    scheme = REGISTRY[name].flags
    allowed = np.ones(table.num_rows, dtype=bool)
    if flag_name(name) in table.column_names:
        flags = floats(table, flag_name(name))
        good = use.ctd_flags if scheme is FlagScheme.CTD else use.water_flags
        allowed &= np.isin(flags, good) | (np.isnan(flags) & use.unflagged)
    else:
        allowed &= use.unflagged
    if scheme is FlagScheme.WATER:
        allowed &= ~np.isin(floats(table, "bottle_flag"), use.refused_bottle_flags)
    checks = floats(table, check_name(name))
    refused = [CHECK_FAULT] if use.doubtful else [CHECK_DOUBT, CHECK_FAULT]
    return allowed & ~np.isin(checks, refused)
