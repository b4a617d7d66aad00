"""The carbonate system of a table of samples: from usable values to columns, in chunks of bounded memory."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.tracers.carbonate_inputs import NUTRIENTS, SOURCES, Inputs, inputs_of
from pipeline.tracers.carbonate_pairs import NO_PAIR, PAIRS, QUANTITIES, Conditions, Measured, pairs_of
from pipeline.tracers.carbonate_state import carbonate_system
from pipeline.tracers.equilibria import equilibria
from pipeline.tracers.uncertainties import carbon_words
from pipeline.variables import CARBONATE, HORIZONS, Kind

if TYPE_CHECKING:
    from collections.abc import Collection, Mapping

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
    inputs, pair = _paired(data, settings)
    columns: dict[str, Any] = {name: np.full(len(data), np.nan) for name in _NUMBERS}
    _solve(columns, inputs, pair, np.flatnonzero(pair != NO_PAIR), settings, chunk)
    return _whole(columns, inputs, pair)


def solved_again(
    before: CarbonateSystem, data: Rows, settings: CarbonateSettings, chunk: int = CHUNK
) -> CarbonateSystem:
    """Return a carbonate system in which samples are solved anew whose pair may no longer be used.

    Of all others everything stays, also how far a third quantity differs that is not used any more.

    Parameters
    ----------
    before
        The system as it was found.
    data
        The same samples with the check flags of now.
    settings, chunk
        As of `system`.

    """
    inputs, pair = _paired(data, settings)
    rows = np.flatnonzero(pair != before.pair)
    if not len(rows):
        return before
    columns = {name: before.columns[name].copy() for name in _NUMBERS}
    for values in columns.values():
        values[rows] = np.nan
    _solve(columns, inputs, pair, rows[pair[rows] != NO_PAIR], settings, chunk)
    found = _whole(columns, inputs, pair)
    unchanged = pair == before.pair
    for name in ("carbonate_pair", "carbonate_nutrients"):
        found.columns[name][unchanged] = before.columns[name][unchanged]
    return found


def _paired(data: Rows, settings: CarbonateSettings) -> tuple[Inputs, IntArray]:
    """Return what may be used of a table, and which pair each sample is solved from."""
    inputs = inputs_of(data, settings)
    pair = pairs_of(*(inputs.quantities[name].values for name in QUANTITIES))
    pair[~inputs.known()] = NO_PAIR
    return inputs, pair


def _whole(columns: dict[str, Any], inputs: Inputs, pair: IntArray) -> CarbonateSystem:
    """Return the system with its columns of text."""
    solved = ~np.isnan(columns["ph_in_situ"])
    columns["carbonate_pair"] = _pair_words(inputs, pair, solved)
    columns["carbonate_nutrients"] = _nutrient_words(inputs, solved)
    return CarbonateSystem(columns, inputs, pair)


def _solve(
    columns: dict[str, Any],
    inputs: Inputs,
    pair: IntArray,
    rows: IntArray,
    settings: CarbonateSettings,
    chunk: int,
) -> None:
    """Write what is found of some rows into the columns."""
    for start in range(0, len(rows), chunk):
        some = rows[start : start + chunk]
        conditions = conditions_of(inputs, some, settings)
        values, uncertainty = carbonate_system(
            measured_of(inputs, some, conditions),
            pair[some],
            conditions,
            constants_too=settings.constants_uncertainty != "none",
        )
        for name, found in values.items():
            columns[name][some] = found
            columns[f"{name}_uncertainty"][some] = uncertainty[name]


def carbonate_forms(names: Collection[str], settings: CarbonateSettings) -> dict[str, dict[str, str]]:
    """Return, by column, which constants were chosen, and what its uncertainty holds: metadata of the columns.

    Parameters
    ----------
    names
        Columns of the table, of which the measured quantities are told with their uncertainty.
    settings
        Which constants, and how uncertain the measurements are.

    """
    constants = (
        f"constants {settings.carbonic}, boron {settings.borate}, fluoride {settings.fluoride},"
        f" bisulfate {settings.bisulfate}, total scale"
    )
    columns = [column for of_one in SOURCES.values() for column in of_one if column in names]
    held = f"measurements, one standard uncertainty each: {carbon_words(columns, settings)}; " + (
        "without the constants, which all samples share"
        if settings.constants_uncertainty == "none"
        else f"constants: {settings.constants_uncertainty}"
    )
    order = ", ".join(f"{QUANTITIES[one]}+{QUANTITIES[other]}" for one, other in PAIRS)
    return {"carbonate_pair": {"form": f"the first that may be used of {order}"}} | {
        v.name: {"form": constants, "uncertainty": held}
        if v.name.endswith("_uncertainty")
        else {"form": constants}
        for v in (*CARBONATE, *HORIZONS)
        if v.kind is Kind.NUMBER
    }


def conditions_of(inputs: Inputs, rows: IntArray, settings: CarbonateSettings) -> Conditions:
    """Return constants in situ, and at the temperatures of pH and gas where any sample of the table has them."""
    needed = {name: bool((~np.isnan(inputs.quantities[name].values)).any()) for name in ("ph", "fco2")}
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


def measured_of(inputs: Inputs, rows: IntArray, at: Conditions) -> Measured:
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
