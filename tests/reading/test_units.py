from __future__ import annotations

from typing import Any

import gsw
import numpy as np
import pint
import pytest

from pipeline.reading import DeliveryKind, read_delivery
from pipeline.reading.description import ColumnEntry, Description
from pipeline.settings import ReadingSettings
from pipeline.units import UNITS, Measure, conversion, folded, scaled, unit_of
from pipeline.variables import EXCHANGE_NAMES, REGISTRY
from tests.invented import LIMITS, bottle_file, checks, one, read


def test_every_exchange_unit_of_the_registry_is_its_own() -> None:
    for name, variable in EXCHANGE_NAMES.items():
        how = conversion(variable, variable.exchange_unit)
        assert how is not None, name
        assert not how.changes, name


@pytest.mark.parametrize("spelling", ["UMOL/KG", "umol/kg", "UMO/KG", "µmol/kg", " UMOL / KG"])
def test_spellings_of_one_unit(spelling: str) -> None:
    how = conversion(REGISTRY["nitrate"], spelling)
    assert how is not None
    assert not how.changes


def test_an_unusual_spelling_is_noted_and_changes_nothing() -> None:
    delivery = read(bottle_file(units={"NITRAT": "UMO/KG"}))
    assert one(delivery, "nitrate") == 30.0
    (finding,) = delivery.findings
    assert finding.message == ("cruise_hy1.csv, line 3: the unit 'UMO/KG' of NITRAT was read as UMOL/KG.")


def test_a_unit_that_cannot_be_read_leaves_the_column_unused() -> None:
    delivery = read(bottle_file(units={"NITRAT": "FURLONGS"}))
    assert "nitrate" not in delivery.table.column_names
    assert one(delivery, "NITRAT") == 30.0
    assert one(delivery, "NITRAT_FLAG_W") == 2
    assert checks(delivery) == ["unknown-unit"]


def test_a_raw_signal_passes_through_without_a_word() -> None:
    delivery = read(bottle_file({"FLUOR": "0.331"}, extra={"FLUOR": "0-5VDC", "FLUOR_FLAG_W": ""}))
    assert one(delivery, "FLUOR") == 0.331
    assert "fluorescence" not in delivery.table.column_names
    assert not delivery.findings


def test_ipts_68_becomes_its_90_and_the_delivered_number_stays() -> None:
    delivery = read(bottle_file({"CTDTMP": "10.0000"}, units={"CTDTMP": "IPTS-68"}))
    assert one(delivery, "temperature") == pytest.approx(9.99760057586, abs=1e-11)
    assert one(delivery, "CTDTMP") == 10.0
    metadata = delivery.table.schema.field("temperature").metadata
    assert metadata[b"delivered_units"] == b"IPTS-68"
    assert b"Saunders 1990" in metadata[b"conversion"]


def test_oxygen_in_ml_per_litre_takes_potential_density_not_in_situ() -> None:
    row = {"CTDPRS": "4000.0", "CTDTMP": "2.3000", "SALNTY": "34.9000", "OXYGEN": "5.600"}
    delivery = read(bottle_file(row, units={"OXYGEN": "ML/L"}))
    salinity = gsw.SR_from_SP(34.9)
    expected = 5.6 * 44.6596 / (gsw.pot_rho_t_exact(salinity, 2.3, 4000.0, 0.0) / 1000)
    assert one(delivery, "bottle_oxygen") == pytest.approx(expected, rel=1e-12)
    wrong = 5.6 * 44.6596 / (gsw.rho_t_exact(salinity, 2.3, 4000.0) / 1000)
    assert abs(expected - wrong) > 4.0


def test_nutrients_per_litre_take_laboratory_density() -> None:
    delivery = read(bottle_file({"SALNTY": "35.0000"}, units={"NITRAT": "UMOL/L"}))
    expected = 30.0 / (gsw.rho_t_exact(gsw.SR_from_SP(35.0), 22.0, 0.0) / 1000)
    assert one(delivery, "nitrate") == pytest.approx(expected, rel=1e-12)


def test_a_volume_without_salinity_cannot_be_converted_and_is_told() -> None:
    missing = {"SALNTY": "-999", "SALNTY_FLAG_W": "9", "CTDSAL": "-999", "CTDSAL_FLAG_W": "9"}
    delivery = read(bottle_file({}, missing, units={"NITRAT": "UMOL/L"}))
    assert one(delivery, "nitrate", 1) is None
    assert one(delivery, "NITRAT", 1) == 30.0
    assert checks(delivery) == ["unit-converted", "not-converted"]
    assert delivery.findings[1].count == 1


def test_micromole_conversion_of_nanomoles() -> None:
    delivery = read(bottle_file({"PHSPHT": "1500"}, units={"PHSPHT": "NMOL/KG"}))
    assert one(delivery, "phosphate") == pytest.approx(1.5)


# What pint calls our units; it knows no ug-at, no tritium units and no scales of temperature.
_PINT = {
    "degree_C": "degC", "percent": "percent", "1e-3": "permille", "uatm": "uatm", "1": "dimensionless",
    "K": "kelvin", "km": "km", "m": "m", "psi": "psi",
}  # fmt: skip
_BASES = {
    Measure.AMOUNT_PER_MASS: "umol/kg", Measure.AMOUNT_PER_VOLUME: "umol/l", Measure.GAS_PER_VOLUME: "ml/l",
    Measure.MASS_PER_VOLUME: "mg/l", Measure.MASS_PER_MASS: "ug/kg", Measure.PRESSURE: "dbar",
    Measure.TEMPERATURE: "degC", Measure.LENGTH: "m", Measure.NUMBER: "dimensionless", Measure.PART: "permille",
}  # fmt: skip
_CHECKED = [unit for unit in UNITS if unit.measure in _BASES and unit.scale is None]


@pytest.mark.parametrize("unit", _CHECKED, ids=lambda unit: unit.name)
def test_factors_agree_with_an_independent_library(unit: object) -> None:
    assert unit in UNITS
    one_of = next(u for u in UNITS if u is unit)
    registry: Any = pint.UnitRegistry(autoconvert_offset_to_baseunit=True)
    written = _PINT.get(one_of.name) or one_of.name.replace(" ", "*").replace("-1", "**-1").replace(
        "-3", "**-3"
    )
    for value in (1.0, 273.15, 12.5):
        expected = registry.Quantity(value, written).to(_BASES[one_of.measure]).magnitude
        assert value * one_of.factor + one_of.offset == pytest.approx(expected, rel=1e-12, abs=1e-9)


def test_spellings_mean_one_unit_of_a_measure() -> None:
    seen: dict[tuple[str, Measure], str] = {}
    for unit in UNITS:
        for spelling in (folded(unit.name), *unit.spellings):
            assert folded(spelling) == spelling, unit.name
            assert seen.setdefault((spelling, unit.measure), unit.name) == unit.name


@pytest.mark.parametrize(
    ("spellings", "name"),
    [
        (("umol kg-1", "µmol kg⁻¹", "micromol/kg", "umol.kg-1", "umol kg^-1", "micromoles per kilogram", "UMO/KG",
          "micromole kg**-1"), "umol kg-1"),
        (("mol kg-1", "mole/kg", "MOL/KG"), "mol kg-1"),
        (("umol/l", "micromol l-1", "uM", "µM", "ug-at/l", "umol/dm3", "micromole per liter", "umol dm-3"), "umol l-1"),
        (("mmol m-3", "mmol/m^3", "millimol m-3", "mmol m**-3"), "mmol m-3"),
        (("ml/l", "mL L-1", "ml l-1", "cm3/dm3", "milliliter/liter"), "ml l-1"),
        (("mg/l", "mg L-1"), "mg l-1"),
        (("degree_Celsius", "degrees C", "deg_C", "degC", "°C", "celsius"), "degree_C"),
        (("K", "kelvin"), "K"),
        (("ITS-90", "deg C (ITS-90)", "degC, ITS-90"), "ITS-90"),
        (("IPTS-68", "deg C (IPTS-68)"), "IPTS-68"),
        (("dbar", "decibar", "decibars"), "dbar"),
        (("MPa", "kPa", "Pa", "hPa", "bar", "psi"), None),
        (("1e-3", "0.001", "per mil", "‰", "/MILLE"), "1e-3"),
        (("1", "PSU", "psu", "PSS-78"), "1"),
    ],
)  # fmt: skip
def test_spellings_as_found(spellings: tuple[str, ...], name: str | None) -> None:
    for spelling in spellings:
        unit = unit_of(spelling)
        assert unit is not None, spelling
        assert unit.name == (name or spelling)


@pytest.mark.parametrize(
    "spelling", ["furlongs", "umol", "nm", "ppm", "m", "mol", "kg-1", "umol/kg/s", "50", "%%"]
)
def test_spellings_that_are_no_unit_of_an_amount(spelling: str) -> None:
    assert conversion(REGISTRY["nitrate"], spelling) is None


@pytest.mark.parametrize(
    ("quantity", "unit", "value", "expected"),
    [
        ("pressure", "MPa", 40.0, 4000.0),
        ("pressure", "kPa", 40000.0, 4000.0),
        ("pressure", "Pa", 4.0e7, 4000.0),
        ("pressure", "bar", 400.0, 4000.0),
        ("pressure", "psi", 14.5037737730, 10.0),
        ("temperature", "K", 275.15, 2.0),
        ("temperature", "IPTS-48", 20.0, (20.0 - 4.4e-6 * 20.0 * 80.0) / 1.00024),
        ("temperature", "IPTS-48", 100.0, 100.0 / 1.00024),
        ("nitrate", "mol kg-1", 30e-6, 30.0),
        ("nitrate", "mmol kg-1", 0.03, 30.0),
        ("cfc11", "mol kg-1", 2e-12, 2.0),
        ("ctd_salinity", "1e-3", 35.0, 35.0),
        ("ctd_salinity", "PSU", 35.0, 35.0),
        ("delta_carbon_13", "percent", 0.1, 1.0),
    ],
)
def test_conversions(quantity: str, unit: str, value: float, expected: float) -> None:
    how = conversion(REGISTRY[quantity], unit)
    assert how is not None
    assert scaled(np.array([value]), how)[0] == pytest.approx(expected, rel=1e-9)


def test_what_has_no_convention_for_volumes_is_not_converted() -> None:
    assert conversion(REGISTRY["dic"], "umol/l") is None
    assert conversion(REGISTRY["nitrate"], "ml/l") is None
    assert conversion(REGISTRY["nitrate"], "mg/l") is None


def test_ipts_48_is_said_in_full() -> None:
    delivery = read(bottle_file({"CTDTMP": "20.0000"}, units={"CTDTMP": "IPTS-48"}))
    words = delivery.table.schema.field("temperature").metadata[b"conversion"].decode()
    assert words.startswith("IPTS-48 to IPTS-68, less 4.4e-6 t (100 - t), then to ITS-90, divided by 1.00024")


def _at(temperature: float, salinity: float = 34.501) -> float:
    return float(gsw.rho_t_exact(gsw.SR_from_SP(salinity), temperature, 0.0)) / 1000.0


def test_the_laboratory_has_the_temperature_of_the_settings_or_of_the_file() -> None:
    data = bottle_file(units={"NITRAT": "UMOL/L"}, extra={"LAB": ""})
    for limits, temperature in ((LIMITS, 22.0), (ReadingSettings(laboratory_temperature=25.0), 25.0)):
        delivery = read_delivery("x.csv", data, limits)
        assert one(delivery, "nitrate") == pytest.approx(30.0 / _at(temperature), rel=1e-12)
        words = delivery.table.schema.field("nitrate").metadata[b"conversion"].decode()
        assert (
            words
            == f"umol l-1 to umol kg-1 with density at the temperature of the laboratory, {temperature:g} degC"
        )


def test_oxygen_takes_the_draw_temperature_where_there_is_one() -> None:
    described = Description(
        "x.csv",
        kind=DeliveryKind.BOTTLE,
        columns=(
            ColumnEntry("station", "station"), ColumnEntry("p", "pressure"), ColumnEntry("t", "temperature"),
            ColumnEntry("s", "bottle_salinity"), ColumnEntry("o", "bottle_oxygen", unit="ml/l"),
            ColumnEntry("draw", "draw_temperature"), ColumnEntry("n", "nitrate", unit="umol/l"),
            ColumnEntry("lab", "laboratory_temperature"),
        ),
        constants={"expocode": "ZZV120090214", "latitude": "-35.5", "longitude": "-12.25"},
    )  # fmt: skip
    data = b"station,p,t,s,o,draw,n,lab\n1,4000,2.3,34.9,5.6,4.0,30,19\n1,3000,2.3,34.9,5.6,,30,\n"
    delivery = read_delivery("x.csv", data, LIMITS, described)
    potential = float(gsw.pot_rho_t_exact(gsw.SR_from_SP(34.9), 2.3, 3000.0, 0.0)) / 1000.0
    assert delivery.table.column("bottle_oxygen").to_pylist() == pytest.approx(
        [5.6 * 44.6596 / _at(4.0, 34.9), 5.6 * 44.6596 / potential], rel=1e-12
    )
    assert delivery.table.column("nitrate").to_pylist() == pytest.approx(
        [30 / _at(19.0, 34.9), 30 / _at(22.0, 34.9)]
    )
    assert delivery.table.column("draw_temperature").to_pylist() == [4.0, None]
    words = delivery.table.schema.field("nitrate").metadata[b"conversion"].decode()
    assert words.endswith("of the laboratory, as delivered, else 22 degC")


def test_depth_of_a_described_table_gives_the_pressure() -> None:
    described = Description(
        "x.csv",
        kind=DeliveryKind.CTD,
        columns=(
            ColumnEntry("station", "station"),
            ColumnEntry("DEPTH", "depth"),
            ColumnEntry("t", "temperature"),
        ),
        constants={"expocode": "ZZV120090214", "latitude": "-35.5", "longitude": "-12.25"},
    )
    delivery = read_delivery("x.csv", b"station,DEPTH,t\n1,1000,4\n1,,5\n", LIMITS, described)
    assert one(delivery, "pressure") == pytest.approx(float(gsw.p_from_z(-1000.0, -35.5)), rel=1e-12)
    assert one(delivery, "DEPTH") == 1000.0
    assert "pressure-from-depth" in checks(delivery)
    assert [reject.reason for reject in delivery.rejects] == ["no-pressure"]
