"""Salinities and temperatures that several checks need, computed once for a table that has no TEOS-10 columns yet."""

from __future__ import annotations

from functools import cached_property
from typing import TYPE_CHECKING
from weakref import WeakKeyDictionary

import numpy as np

from pipeline import seawater

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]


class Hydrography:
    """What the usable salinity, temperature and pressure of a table's n_row rows say.

    Every array is (n_row,), NaN where something that is needed is missing or may not be used by its
    delivered flag, or lies outside the bounds of TEOS-10, and not to be written to. Each is computed when it
    is first asked for.

    Parameters
    ----------
    data
        Samples or CTD levels, as delivered. Not kept: only its arrays are.

    """

    def __init__(self, data: Rows) -> None:
        pressure = data.usable("pressure")
        bounded: FloatArray = np.where(seawater.PRESSURE.holds(pressure), pressure, np.nan)
        self.pressure: FloatArray = bounded.round(6)  # levels that are nearer would only overflow a slope
        self.temperature: FloatArray = data.usable("temperature")
        bottle = data.usable("bottle_salinity")
        self.salinity: FloatArray = np.where(np.isnan(bottle), data.usable("ctd_salinity"), bottle)
        self._latitude = data.floats("latitude")
        self._longitude = data.floats("longitude")
        self._cast = data.casts

    @cached_property
    def absolute_salinity(self) -> FloatArray:
        """Absolute Salinity of ``salinity`` (the bottle's where it may be used, else the CTD's), g/kg."""
        return seawater.absolute_salinity(self.salinity, self.pressure, self._longitude, self._latitude)

    @cached_property
    def conservative_temperature(self) -> FloatArray:
        """Conservative Temperature, degC."""
        return seawater.conservative_temperature(self.absolute_salinity, self.temperature, self.pressure)

    @cached_property
    def potential_temperature(self) -> FloatArray:
        """Potential temperature referred to the surface, ITS-90, degC."""
        return seawater.potential_temperature(self.absolute_salinity, self.temperature, self.pressure)

    @cached_property
    def order(self) -> IntArray:
        """The rows that have a usable pressure, cast after cast, from the surface down, (n_known,)."""
        known = np.flatnonzero(~np.isnan(self.pressure))
        return np.asarray(known[np.lexsort((self.pressure[known], self._cast[known]))], dtype=np.int64)

    @cached_property
    def starts(self) -> IntArray:
        """Where in ``order`` each cast begins, (n_cast,)."""
        cast = self._cast[self.order]
        return np.flatnonzero(np.diff(cast, prepend=-1)).astype(np.int64)

    def casts(self) -> Iterator[IntArray]:
        """Yield the rows of each cast that have a pressure, from the surface down."""
        yield from np.split(self.order, self.starts[1:]) if len(self.order) else ()


_OF_TABLES: WeakKeyDictionary[Rows, Hydrography] = WeakKeyDictionary()


def hydrography(data: Rows) -> Hydrography:
    """Return the hydrography of a table, the same object for all checks that look at it."""
    if data not in _OF_TABLES:
        _OF_TABLES[data] = Hydrography(data)
    return _OF_TABLES[data]
