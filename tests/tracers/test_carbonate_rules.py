"""Rules of thumb of the trade (common practice, no source) beside what is computed, and where the two part."""

from __future__ import annotations

import numpy as np
import pytest

from pipeline.carbonate_settings import CarbonateSettings
from pipeline.tracers.carbonate import system
from pipeline.tracers.carbonate_pairs import state
from pipeline.tracers.equilibria import equilibria

from .carbon_cases import ocean, rows

CHOICE = CarbonateSettings()
# Salinity, degC, dbar, alkalinity, DIC, silicate, phosphate of waters as they are usual (common practice, no source),
# and the part of DIC that is aqueous CO2, computed by PyCO2SYS 1.8.3.4 with the same constants.
WATERS = {
    "warm surface": ((35.0, 25.0, 0.0, 2300.0, 2000.0, 1.0, 0.1), 0.0057),
    "temperate surface": ((35.0, 15.0, 0.0, 2310.0, 2080.0, 2.0, 0.3), 0.0069),
    "polar surface": ((34.0, -1.0, 0.0, 2290.0, 2170.0, 40.0, 1.5), 0.0111),
    "North Atlantic deep": ((34.92, 2.7, 3000.0, 2320.0, 2175.0, 25.0, 1.4), 0.0094),
    "Southern Ocean deep": ((34.70, 0.5, 3000.0, 2360.0, 2258.0, 120.0, 2.25), 0.0126),
    "North Pacific deep": ((34.69, 1.5, 4000.0, 2430.0, 2320.0, 150.0, 2.5), 0.0120),
    "oxygen minimum": ((34.5, 5.0, 900.0, 2360.0, 2330.0, 100.0, 3.1), 0.0226),
}  # fmt: skip


def table(*waters: tuple[float, ...]) -> dict[str, np.ndarray]:
    names = ("practical_salinity", "temperature", "pressure", "alkalinity", "dic", "silicate", "phosphate")
    return dict(system(rows([dict(zip(names, water, strict=True)) for water in waters]), CHOICE).columns)


@pytest.mark.parametrize("name", WATERS)
def test_the_part_of_aqueous_co2(name: str) -> None:
    """The rule says one to two per cent in most of the ocean. That is the deep: warm surface water has half of it."""
    water, expected = WATERS[name]
    found = table(water)
    assert found["aqueous_co2_fraction"][0] == pytest.approx(expected, abs=1e-4)
    rest = found["bicarbonate_fraction"][0] + found["carbonate_fraction"][0]
    assert rest == pytest.approx(1.0 - found["aqueous_co2_fraction"][0], abs=1e-15)
    assert found["bicarbonate_fraction"][0] > 0.8


def test_the_rule_of_one_to_two_per_cent_holds_below_the_warm_layers_and_not_in_them() -> None:
    parts = dict(
        zip(WATERS, table(*(water for water, _ in WATERS.values()))["aqueous_co2_fraction"], strict=True)
    )
    for name in ("polar surface", "Southern Ocean deep", "North Pacific deep"):
        assert 0.01 <= parts[name] <= 0.02
    assert 0.009 < parts["North Atlantic deep"] < 0.01  # by a twentieth too little
    assert parts["warm surface"] < 0.006  # half of what the rule says
    assert parts["temperate surface"] < 0.007
    assert parts["oxygen minimum"] > 0.022  # by a tenth too much


def test_adding_carbon_dioxide_lowers_carbonate_ion_everywhere_in_the_ocean() -> None:
    """At equal alkalinity, over all salinities, temperatures and pressures: it takes up more than it makes."""
    w = ocean(5000, seed=2)
    k = equilibria(
        w["salinity"],
        w["temperature"],
        w["pressure"],
        CHOICE,
        silicate=w["silicate"],
        phosphate=w["phosphate"],
    )
    before, after = (state(w["dic"] + added, w["alkalinity"], k) for added in (0.0, 10.0))
    ions = [s.dic * s.acids.carbonate for s in (before, after)]
    known = ~np.isnan(ions[0] + ions[1])
    assert known.mean() > 0.99
    assert (ions[1] < ions[0])[known].all()
    assert (after.ph < before.ph)[known].all()
    assert (after.fco2 > before.fco2)[known].all()
    # Of what is added, three to seven tenths are paid for with carbonate ion.
    taken = ((ions[0] - ions[1]) / 10.0)[known]
    assert taken.min() > 0.3
    assert taken.max() < 0.75


def test_the_revelle_factor_is_about_ten_in_warm_water_and_fifteen_in_cold() -> None:
    found = table(*(WATERS[name][0] for name in ("warm surface", "temperate surface", "polar surface")))
    assert found["revelle_factor"] == pytest.approx([9.56, 11.22, 15.55], abs=5e-3)


def test_aragonite_dissolves_before_calcite() -> None:
    found = table(*(water for water, _ in WATERS.values()))
    ratio = found["calcite_saturation"] / found["aragonite_saturation"]
    assert (ratio > 1.4).all()
    assert (ratio < 1.65).all()
