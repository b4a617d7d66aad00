from __future__ import annotations

import gsw
import pytest

from pipeline.units import conversion
from pipeline.variables import EXCHANGE_NAMES, REGISTRY
from tests.invented import bottle_file, checks, one, read


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
