"""Which values downstream work may use: decided by the delivered flags and by our own check flags."""

from __future__ import annotations

from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from pipeline.tables import cast_groups, floats
from pipeline.variables import MEASURED, REGISTRY, FlagScheme, check_name, corrected_name, flag_name

if TYPE_CHECKING:
    from collections.abc import Iterable

    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.settings import UseSettings

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

_MEASURED = frozenset(MEASURED)
# IODE primary flags, IOC Manuals and Guides 54, vol. 3 (2013): what our own check columns hold.
CHECK_GOOD, CHECK_NOT_DONE, CHECK_DOUBT, CHECK_FAULT, CHECK_MISSING = 1, 2, 3, 4, 9


class Rows:
    """A table of n_row rows: its columns as numbers, each taken out once, and which of them may be used.

    Parameters
    ----------
    table
        Samples or CTD levels.
    use
        Which flags count as good.

    """

    def __init__(self, table: pa.Table, use: UseSettings) -> None:
        self.table = table
        self.names = frozenset(table.schema.names)
        self.is_bottle = "sample" in self.names
        self._use = use
        self._floats: dict[str, FloatArray] = {}
        self._may_use: dict[str, BoolArray] = {}
        self._usable: dict[str, FloatArray] = {}

    def __len__(self) -> int:
        """Return n_row."""
        return int(self.table.num_rows)

    @cached_property
    def casts(self) -> IntArray:
        """A number per row, the same for the rows of one cast, (n_row,)."""
        return cast_groups(self.table)

    def floats(self, name: str) -> FloatArray:
        """Return a column as numbers, (n_row,), NaN where missing or no such column. Not to be written to."""
        if name not in self._floats:
            self._floats[name] = floats(self.table, name)
        return self._floats[name]

    def usable(self, name: str) -> FloatArray:
        """Return the values of ``name`` that may be used, (n_row,), NaN for all others.

        Where the table has the column with the settings' correction, its values stand for the delivered
        ones, under the same flags. A derived column is usable as it is: it was computed from usable values only.
        Not to be written to.
        """
        if name not in self._usable:
            corrected = corrected_name(name)
            values = self.floats(corrected if corrected in self.names else name)
            if name in _MEASURED:
                values = np.where(self.may_use(name), values, np.nan)
                values.flags.writeable = False
            self._usable[name] = values
        return self._usable[name]

    def may_use(self, name: str) -> BoolArray:
        """Return where the delivered flags and our checks let a measured value be used, (n_row,)."""
        if name not in self._may_use:
            self._may_use[name] = self._decide(name)
        return self._may_use[name]

    def _decide(self, name: str) -> BoolArray:
        use, scheme = self._use, REGISTRY[name].flags
        if flag_name(name) in self.names:
            flags = self.floats(flag_name(name))
            allowed = one_of(flags, use.ctd_flags if scheme is FlagScheme.CTD else use.water_flags)
            if use.unflagged:
                allowed |= np.isnan(flags)
        else:
            allowed = np.full(len(self), use.unflagged)
        if scheme is FlagScheme.WATER and "bottle_flag" in self.names:
            allowed &= ~one_of(self.floats("bottle_flag"), use.refused_bottle_flags)
        if check_name(name) in self.names:
            refused = (CHECK_FAULT,) if use.doubtful else (CHECK_DOUBT, CHECK_FAULT)
            allowed &= ~one_of(self.floats(check_name(name)), refused)
        return allowed


def usable(table: pa.Table, name: str, use: UseSettings) -> FloatArray:
    """Return the values of one column that may be used, as ``Rows.usable`` does."""
    return Rows(table, use).usable(name)


def one_of(values: FloatArray, few: Iterable[float]) -> BoolArray:
    """Return where ``values`` is one of a few numbers, (n,): faster than a set operation for so few."""
    found = np.zeros(values.shape, dtype=bool)
    for number in few:
        found |= values == number
    return found
