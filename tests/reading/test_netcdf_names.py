from __future__ import annotations

from typing import Any

import pytest

from pipeline.reading.description import ColumnEntry, Description
from pipeline.reading.schemes import Scheme
from tests.invented import checks, one
from tests.reading.netcdf_files import (
    QUANTITIES,
    Plan,
    Quantity,
    netcdf_bytes,
    read_nc,
    rows,
)


def test_flags_of_a_quantity_whose_unit_cannot_be_read_pass_through_with_it() -> None:
    def spoil(file: Any) -> None:
        file["nitrate"].units = "furlong"

    delivery = read_nc(netcdf_bytes(rows(), Plan(spoil=spoil)))
    assert checks(delivery) == ["unknown-unit"]
    assert one(delivery, "nitrate_delivered") == float(rows()[0]["NITRAT"])
    assert one(delivery, "nitrate_qc") == 2.0


def test_one_salinity_in_a_file_of_bottles_is_taken_for_the_bottles_and_told() -> None:
    def spoil(file: Any) -> None:
        file["salinity_sample"].long_name = "salinity"

    quantities = tuple(q for q in QUANTITIES if q.exchange != "CTDSAL")
    plan = Plan(quantities=tuple(q if q.name != "salinity_sample" else
                                 Quantity("SALNTY", "psal", q.standard_name, "PSU") for q in quantities))  # fmt: skip
    delivery = read_nc(netcdf_bytes(rows(), plan))
    assert "bottle_salinity" in delivery.table.column_names
    assert checks(delivery) == ["meaning-assumed"]
    assert "it was taken for the bottle's" in delivery.findings[0].message


def test_depth_takes_the_place_of_a_pressure_that_is_not_there() -> None:
    import gsw  # noqa: PLC0415

    depth = Quantity("CTDPRS", "z", "depth", "m", flagged=False)
    delivery = read_nc(netcdf_bytes(rows(), Plan(quantities=(depth, *QUANTITIES[1:]))))
    expected = gsw.p_from_z(-3000.0, -35.5)
    assert one(delivery, "pressure") == pytest.approx(expected, rel=1e-12)
    assert one(delivery, "z") == 3000.0
    assert checks(delivery) == ["pressure-from-depth"]
    metadata = delivery.table.schema.field("pressure").metadata
    assert b"gsw.p_from_z" in metadata[b"conversion"]


def test_depth_that_counts_upward_is_turned_round() -> None:
    def spoil(file: Any) -> None:
        file["z"].positive = "up"
        file["z"][:] = -file["z"][:]

    depth = Quantity("CTDPRS", "z", "depth", "m", flagged=False)
    turned = read_nc(netcdf_bytes(rows(), Plan(quantities=(depth, *QUANTITIES[1:]), spoil=spoil)))
    down = read_nc(netcdf_bytes(rows(), Plan(quantities=(depth, *QUANTITIES[1:]))))
    assert turned.table.column("pressure").to_pylist() == down.table.column("pressure").to_pylist()
    assert one(turned, "z") == -3000.0


def test_units_of_cf_are_converted_and_told() -> None:
    quantities = (
        Quantity("CTDPRS", "pressure", "sea_water_pressure_due_to_sea_water", "kPa", flagged=False),
        Quantity("CTDTMP", "temperature", "sea_water_temperature", "K", "ITS-90", flagged=False),
        *QUANTITIES[2:5],
        Quantity("NITRAT", "nitrate", "mole_concentration_of_nitrate_in_sea_water", "mmol m-3"),
        Quantity("PHSPHT", "phosphate", "moles_of_phosphate_per_unit_mass_in_sea_water", "mol kg-1"),
    )
    samples = [row | {"CTDPRS": repr(10 * float(row["CTDPRS"])), "CTDTMP": repr(273.15 + float(row["CTDTMP"]))}
               for row in rows()]  # fmt: skip
    delivery = read_nc(netcdf_bytes(samples, Plan(quantities=quantities)))
    assert one(delivery, "pressure") == pytest.approx(3000.0, rel=1e-14)
    assert one(delivery, "temperature") == pytest.approx(float(rows()[0]["CTDTMP"]), abs=1e-12)
    assert one(delivery, "phosphate") == pytest.approx(1e6 * float(rows()[0]["PHSPHT"]))
    assert 0.97 < one(delivery, "nitrate") / float(rows()[0]["NITRAT"]) < 0.98  # type: ignore[operator]
    assert checks(delivery) == ["unit-converted"] * 4


def test_a_standard_name_and_a_unit_that_disagree_the_unit_is_believed() -> None:
    wrong = Quantity(
        "OXYGEN", "doxy", "mass_concentration_of_oxygen_in_sea_water", "micromol l-1", "of the bottle"
    )
    delivery = read_nc(netcdf_bytes(rows(), Plan(quantities=(*QUANTITIES[:4], wrong))))
    told = {finding.check: finding.message for finding in delivery.findings}
    assert "the unit was believed" in told["unit-contradicts-name"]
    assert 0.97 < one(delivery, "bottle_oxygen") / float(rows()[0]["OXYGEN"]) < 0.98  # type: ignore[operator]


def test_what_is_derived_is_not_taken_for_what_is_measured() -> None:
    heat = Quantity("CTDTMP", "ct", "sea_water_conservative_temperature", "degree_C", flagged=False)
    delivery = read_nc(netcdf_bytes(rows(), Plan(quantities=(QUANTITIES[0], heat, *QUANTITIES[2:]))))
    assert "temperature" not in delivery.table.column_names
    assert one(delivery, "ct") == float(rows()[0]["CTDTMP"])
    assert checks(delivery) == ["derived-delivered"]


def test_a_description_stands_over_what_the_file_says() -> None:
    entries = (
        ColumnEntry("nitrate", "nitrate_plus_nitrite"),
        ColumnEntry("phosphate", "phosphate", unit="nmol/kg", flag="phosphate_qc", flag_scheme=Scheme.WHP),
    )
    delivery = read_nc(netcdf_bytes(rows()), Description("cruise.nc", columns=entries))
    assert one(delivery, "nitrate_plus_nitrite") == float(rows()[0]["NITRAT"])
    assert one(delivery, "nitrate_plus_nitrite_flag") == 2
    assert (
        "nitrate" not in delivery.table.column_names or "nitrate_plus_nitrite" in delivery.table.column_names
    )
    assert one(delivery, "phosphate") == pytest.approx(1e-3 * float(rows()[0]["PHSPHT"]))
    assert one(delivery, "phosphate_flag") == 2
