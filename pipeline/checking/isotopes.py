"""Carbon and oxygen isotopes: the ranges of the open ocean, and oxygen-18 beside salinity."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.checking.hydrography import hydrography
from pipeline.checking.marks import Mark
from pipeline.checking.neighbours import neighbours, plausible, unlike
from pipeline.findings import Severity

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.settings import Settings
    from pipeline.usable import Rows

    FloatArray = NDArray[np.float64]

_NAME = "isotope-range"
_DEEP = 2000.0  # dbar
# Fresher water is a river's or the ice's, with isotopes of its own.
_OPEN_OCEAN_SALINITY = 30.0
# Oxygen-18 between the most depleted melt and rain of high latitudes that mixes with sea water, and what
# evaporation does to it (from memory; common practice, no source): per mil at a salinity, and per unit of it.
_SEA_SALINITY = 34.7
_OXYGEN_18_LOW, _OXYGEN_18_HIGH = (-1.0, 0.75), (1.5, 0.5)


def isotope_range(data: Rows, settings: Settings) -> list[Mark]:
    """Isotope ratios outside what the open ocean has at that depth or salinity, unlike the samples beside them."""
    checks = settings.checks
    water = hydrography(data)
    marks: list[Mark] = []
    for name, departs in checks.delta_departure:
        values = plausible(data, name) if name in data.names else np.empty(0)
        if not len(values) or np.isnan(values).all():
            continue
        alone = _alone(data, values, departs)
        with np.errstate(invalid="ignore"):
            deep = water.pressure >= _DEEP
            if name == "delta_carbon_13":
                low, high = checks.delta_carbon_13
                fresh = water.salinity < _OPEN_OCEAN_SALINITY
                odd = ~fresh & ((values < low) | (values > high))
                marks += _doubts(name, values, odd, f"{low:g} to {high:g} per mil in the open ocean")
                low, high = checks.deep_delta_carbon_13
                odd = ~odd & alone & deep & ((values < low) | (values > high))
                marks += _doubts(
                    name, values, odd, f"{low:g} to {high:g} per mil below {_DEEP:g} dbar", beside=True
                )
            elif name == "delta_carbon_14":
                odd = alone & deep & (values > 0.0)
                limit = f"no more than 0 per mil below {_DEEP:g} dbar, where the water is old"
                marks += _doubts(name, values, odd, limit, beside=True)
            elif name == "delta_oxygen_18":
                fresher = np.maximum(_SEA_SALINITY - water.salinity, 0.0)
                saltier = np.maximum(water.salinity - _SEA_SALINITY, 0.0)
                least = _OXYGEN_18_LOW[0] - _OXYGEN_18_LOW[1] * fresher
                most = _OXYGEN_18_HIGH[0] + _OXYGEN_18_HIGH[1] * saltier
                odd = alone & ((values < least) | (values > most))
                limit = (
                    f"{_OXYGEN_18_LOW[0]:g} to {_OXYGEN_18_HIGH[0]:g} per mil near a salinity of {_SEA_SALINITY:g},"
                    " less in fresher and more in saltier water"
                )
                marks += _doubts(name, values, odd, limit, beside=True)
    return marks


def _alone(data: Rows, values: FloatArray, departs: float) -> NDArray[np.bool_]:
    """Return which values differ from all that stands beside them, (n_row,); those with nothing beside do not."""
    with np.errstate(invalid="ignore"):
        return np.asarray(unlike(values, neighbours(data, values)) > departs)


def _doubts(
    name: str, values: FloatArray, odd: NDArray[np.bool_], limit: str, *, beside: bool = False
) -> list[Mark]:
    rows = np.flatnonzero(odd)
    if not len(rows):
        return []
    words = "is {value}, and no sample beside it is like that" if beside else "is {value}"
    return [Mark(_NAME, Severity.DOUBT, name, rows, values[rows].tolist(), words, limit)]
