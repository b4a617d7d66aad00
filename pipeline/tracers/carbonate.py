"""The carbonate system of a table of samples: from usable values to columns, in chunks of bounded memory."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.tracers.carbonate_inputs import NUTRIENTS, SOURCES, Inputs, inputs_of
from pipeline.tracers.carbonate_pairs import NO_PAIR, PAIRS, QUANTITIES, Conditions, Measured, pairs_of
from pipeline.tracers.carbonate_state import carbonate_system
from pipeline.tracers.equilibria import equilibria
from pipeline.variables import CARBONATE, HORIZONS, Kind

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from pipeline.carbonate_settings import CarbonateSettings
    from pipeline.tables import FloatArray
    from pipeline.tracers.equilibria import Equilibria
    from pipeline.usable import Rows

    BoolArray = NDArray[np.bool_]
    IntArray = NDArray[np.int64]

CHUNK = 20_000  # samples at a time
_NUMBERS = tuple(v.name for v in CARBONATE if v.kind is Kind.NUMBER)


@dataclass(frozen=True, slots=True)
class CarbonateSystem:
    """The columns of the carbonate system, by registry name, (n_row,) each, and what they were made from."""

    columns: Mapping[str, Any]
    inputs: Inputs
    pair: IntArray  # into PAIRS, or NO_PAIR

    @property
    def solved(self) -> BoolArray:
        """Where a state was found, (n_row,)."""
        found: BoolArray = ~np.isnan(self.columns["ph_in_situ"])
        return found


def system(data: Rows, settings: CarbonateSettings, chunk: int = CHUNK) -> CarbonateSystem:
    """Return the carbonate system of every sample that has two of its quantities; missing for all others.

    Parameters
    ----------
    data
        n_row samples with their working columns.
    settings
        Which constants, and how uncertain the measurements are.
    chunk
        Samples solved at a time, which bounds the memory; the result does not depend on it.

    """
    inputs = inputs_of(data, settings)
    pair = pairs_of(*(inputs.quantities[name].values for name in QUANTITIES))
    pair[~inputs.known()] = NO_PAIR
    columns: dict[str, Any] = {name: np.full(len(data), np.nan) for name in _NUMBERS}
    rows = np.flatnonzero(pair != NO_PAIR)
    needed = {name: bool((~np.isnan(inputs.quantities[name].values[rows])).any()) for name in ("ph", "fco2")}
    for start in range(0, len(rows), chunk):
        some = rows[start : start + chunk]
        conditions = _conditions(inputs, some, needed, settings)
        values, uncertainty = carbonate_system(
            _measured(inputs, some, conditions),
            pair[some],
            conditions,
            constants_too=settings.constants_uncertainty != "none",
        )
        for name, found in values.items():
            columns[name][some] = found
            columns[f"{name}_uncertainty"][some] = uncertainty[name]
    solved = ~np.isnan(columns["ph_in_situ"])
    columns["carbonate_pair"] = _pair_words(inputs, pair, solved)
    columns["carbonate_nutrients"] = _nutrient_words(inputs, solved)
    return CarbonateSystem(columns, inputs, pair)


def carbonate_forms(settings: CarbonateSettings) -> dict[str, dict[str, str]]:
    """Return, by column, which constants were chosen, and what its uncertainty holds: metadata of the columns."""
    constants = (
        f"constants {settings.carbonic}, boron {settings.borate}, fluoride {settings.fluoride},"
        f" bisulfate {settings.bisulfate}, total scale"
    )
    held = (
        "measurements"
        if settings.constants_uncertainty == "none"
        else (f"measurements and constants ({settings.constants_uncertainty})")
    )
    return {
        v.name: {"form": constants, "uncertainty": held}
        if v.name.endswith("_uncertainty")
        else {"form": constants}
        for v in (*CARBONATE, *HORIZONS)
        if v.kind is Kind.NUMBER
    }


def _conditions(
    inputs: Inputs, rows: IntArray, needed: Mapping[str, bool], settings: CarbonateSettings
) -> Conditions:
    """Return constants in situ, and at the temperatures of pH and gas where any sample has them."""
    salinity, temperature = inputs.salinity[rows], inputs.temperature[rows]
    nutrients = {name: np.nan_to_num(inputs.nutrients[name][rows], nan=0.0) for name in NUTRIENTS}

    def at(degrees: FloatArray, pressure: FloatArray) -> Equilibria:
        return equilibria(salinity, degrees, pressure, settings, **nutrients)

    def measured_at(name: str) -> Equilibria:
        degrees = inputs.quantities[name].temperature[rows]
        return at(np.where(np.isnan(degrees), temperature, degrees), np.zeros(len(rows)))

    in_situ = at(temperature, inputs.pressure[rows])
    of_ph, of_gas = (measured_at(name) if needed[name] else in_situ for name in ("ph", "fco2"))
    return Conditions(in_situ, of_ph, of_gas)


def _measured(inputs: Inputs, rows: IntArray, at: Conditions) -> Measured:
    """Return what was measured of some rows, pH on the total scale and the gas as fugacity."""
    found = {name: inputs.quantities[name].values[rows] for name in QUANTITIES}
    uncertainty = {name: inputs.quantities[name].uncertainty[rows] for name in QUANTITIES}
    column = {name: inputs.quantities[name].column[rows] for name in QUANTITIES}
    seawater_scale = column["ph"] == SOURCES["ph"].index("ph_seawater")
    found["ph"] = found["ph"] + np.where(seawater_scale, at.of_ph.total_less_seawater_scale, 0.0)
    is_pressure = column["fco2"] == SOURCES["fco2"].index("pco2")
    fugacity = np.where(is_pressure, at.of_gas.fugacity_factor, 1.0)
    found["fco2"], uncertainty["fco2"] = found["fco2"] * fugacity, uncertainty["fco2"] * fugacity
    return Measured(found["dic"], found["alkalinity"], found["ph"], found["fco2"], uncertainty)


def _pair_words(inputs: Inputs, pair: IntArray, solved: BoolArray) -> NDArray[Any]:
    """Return the pair of every solved sample by its columns, such as ``dic+ph_total``, (n_row,)."""
    words = np.full(len(pair), None, dtype=object)
    for number, (one, other) in enumerate((QUANTITIES[i], QUANTITIES[j]) for i, j in PAIRS):
        for i, first in enumerate(SOURCES[one]):
            for j, second in enumerate(SOURCES[other]):
                of_columns = (inputs.quantities[one].column == i) & (inputs.quantities[other].column == j)
                words[(pair == number) & of_columns & solved] = f"{first}+{second}"
    return words


def _nutrient_words(inputs: Inputs, solved: BoolArray) -> NDArray[Any]:
    """Return which nutrients every solved sample had, (n_row,)."""
    words = np.full(len(solved), None, dtype=object)
    there = [~np.isnan(inputs.nutrients[name]) for name in NUTRIENTS]
    for number in range(1 << len(NUTRIENTS)):
        has = [bool(number >> i & 1) for i in range(len(NUTRIENTS))]
        here = np.logical_and.reduce([t == h for t, h in zip(there, has, strict=True)])
        words[here & solved] = "+".join(n for n, h in zip(NUTRIENTS, has, strict=True) if h) or "none"
    return words
