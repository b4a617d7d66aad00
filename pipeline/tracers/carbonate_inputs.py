"""What of a table of samples a carbonate system can be solved from: which column, at which temperature, how certain."""

from __future__ import annotations

from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING, cast

import numpy as np

from pipeline.seawater import Domain
from pipeline.tracers.alkalinity import HIGHEST_PH, LOWEST_PH
from pipeline.tracers.equilibria import PRESSURE, SALINITY, TEMPERATURE
from pipeline.tracers.uncertainties import carbon_uncertainty

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from pipeline.carbonate_settings import CarbonateSettings
    from pipeline.tables import FloatArray
    from pipeline.usable import Rows

    IntArray = NDArray[np.int64]

# Each quantity, and the columns it may come from, the first usable one taken.
SOURCES: Mapping[str, tuple[str, ...]] = MappingProxyType(
    {
        "dic": ("dic",),
        "alkalinity": ("alkalinity",),
        "ph": ("ph_total", "ph_seawater"),
        "fco2": ("fco2", "pco2"),
    }
)
# Columns that say at which temperature another was measured.
TEMPERATURES: Mapping[str, str] = MappingProxyType(
    {
        "ph_total": "ph_temperature",
        "ph_seawater": "ph_temperature",
        "fco2": "fco2_temperature",
        "pco2": "pco2_temperature",
    }
)
# What a quantity may be for a state to be looked for. Narrower limits are for the checks of delivered values.
_AMOUNT, _PH, _GAS = Domain(100.0, 5000.0), Domain(LOWEST_PH, HIGHEST_PH), Domain(5.0, 20_000.0)
POSSIBLE: Mapping[str, Domain] = MappingProxyType(
    {"dic": _AMOUNT, "alkalinity": _AMOUNT, "ph_total": _PH, "ph_seawater": _PH, "fco2": _GAS, "pco2": _GAS}
)
# Below zero by as little as a limit of detection explains, a nutrient counts as none.
_NUTRIENT = Domain(-1.0, 1000.0)
NUTRIENTS = ("silicate", "phosphate")
NO_COLUMN = -1


@dataclass(frozen=True, slots=True)
class Chosen:
    """One quantity as it was measured, (n_row,) each, NaN where it was not."""

    values: FloatArray
    column: IntArray  # which of SOURCES it came from, or NO_COLUMN
    temperature: FloatArray  # degC at which it was measured; NaN for what has none
    uncertainty: FloatArray


@dataclass(frozen=True, slots=True)
class Inputs:
    """All that a carbonate system is solved from, (n_row,) each, NaN where it is not there."""

    quantities: Mapping[str, Chosen]
    salinity: FloatArray
    temperature: FloatArray
    pressure: FloatArray
    nutrients: Mapping[str, FloatArray]

    def known(self) -> NDArray[np.bool_]:
        """Return where constants in situ can be had, (n_row,)."""
        return ~np.isnan(self.salinity + self.temperature + self.pressure)


def measured_here(names: frozenset[str]) -> bool:
    """Return whether a table with these columns has two quantities that a carbonate system can be solved from."""
    return sum(any(column in names for column in columns) for columns in SOURCES.values()) >= 2


def inputs_of(data: Rows, settings: CarbonateSettings) -> Inputs:
    """Return what may be used of a table, and is possible in sea water."""
    salinity, temperature, pressure = (
        _inside(data.usable(name), domain)
        for name, domain in (
            ("practical_salinity", SALINITY),
            ("temperature", TEMPERATURE),
            ("pressure", PRESSURE),
        )
    )
    nutrients = {name: np.maximum(_inside(data.usable(name), _NUTRIENT), 0.0) for name in NUTRIENTS}
    quantities = {name: _chosen(data, columns, settings) for name, columns in SOURCES.items()}
    return Inputs(quantities, salinity, temperature, pressure, nutrients)


def temperature_of(data: Rows, column: str, settings: CarbonateSettings) -> FloatArray:
    """Return the temperature at which a column was measured, (n_row,), NaN where nothing says, or it is none."""
    told = data.usable(TEMPERATURES[column])
    assumed = cast("Mapping[str, float]", settings.assumed_temperature)
    return _inside(np.where(np.isnan(told), assumed.get(column, np.nan), told), TEMPERATURE)


def _chosen(data: Rows, columns: tuple[str, ...], settings: CarbonateSettings) -> Chosen:
    n_row = len(data)
    values, temperature, uncertainty = (np.full(n_row, np.nan) for _ in range(3))
    from_column = np.full(n_row, NO_COLUMN, dtype=np.int64)
    for number, column in enumerate(columns):
        own = _inside(data.usable(column), POSSIBLE[column])
        measured_at = temperature_of(data, column, settings) if column in TEMPERATURES else np.zeros(n_row)
        take = np.isnan(values) & ~np.isnan(own) & ~np.isnan(measured_at)
        values[take], from_column[take] = own[take], number
        uncertainty[take] = carbon_uncertainty(column, own[take], settings)
        if column in TEMPERATURES:
            temperature[take] = measured_at[take]
    return Chosen(values, from_column, temperature, uncertainty)


def _inside(values: FloatArray, domain: Domain) -> FloatArray:
    return np.where(domain.holds(values), values, np.nan)
