"""A file of several cruises: what concerns a whole column is told of each of them, with its own numbers."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.reading import Delivery, read_cruise_file, read_delivery
from tests.invented import EXPOCODE, LIMITS, bottle_file, read
from tests.reading.netcdf_files import Plan, netcdf_bytes, rows

if TYPE_CHECKING:
    from pipeline.findings import Finding

OTHER = "ZZV220100301"
NO_WATER = {"CTDTMP": "-999.0", "CTDSAL": "-999.0", "SALNTY": "-999.0"}


def told(delivery: Delivery, check: str, variable: str | None = None) -> list[Finding]:
    return [f for f in delivery.findings if f.check == check and variable in {None, f.variable}]


def two(*rows: dict[str, str], **units: str) -> Delivery:
    return read(bottle_file(*rows, units=units))


def test_what_could_not_be_converted_is_counted_for_each_cruise() -> None:
    delivery = two({}, NO_WATER, *[{"EXPOCODE": OTHER, **NO_WATER}] * 3, PHSPHT="UMOL/L")
    whole, one, other = delivery, delivery.of_cruise(EXPOCODE), delivery.of_cruise(OTHER)
    for part, count in ((whole, 4), (one, 1), (other, 3)):
        (finding,) = told(part, "not-converted")
        assert finding.count == count
    assert told(one, "not-converted")[0].message == (
        "cruise_hy1.csv: 1 of the 2 values of PHSPHT could not be converted from UMOL/L to umol/kg, because the row has"
        " no salinity or temperature for its density; it counts as missing, and as delivered it stands in PHSPHT;"
        " deliver salinity and temperature with it."
    )
    assert told(other, "not-converted")[0].message.startswith(
        "cruise_hy1.csv: none of the 3 values of PHSPHT could be converted from UMOL/L to umol/kg, because the rows"
    )


def test_a_column_of_which_nothing_was_converted_is_not_said_to_have_been() -> None:
    delivery = two({}, *[{"EXPOCODE": OTHER, **NO_WATER}] * 3, PHSPHT="UMOL/L")
    assert len(told(delivery, "unit-converted", "phosphate")) == 1
    assert len(told(delivery.of_cruise(EXPOCODE), "unit-converted", "phosphate")) == 1
    assert not told(delivery.of_cruise(OTHER), "unit-converted", "phosphate")
    nothing = two(NO_WATER, PHSPHT="UMOL/L")
    assert not told(nothing, "unit-converted", "phosphate")
    assert nothing.table.column("phosphate").null_count == 1
    assert b"conversion" not in nothing.table.schema.field("phosphate").metadata


def test_a_note_on_a_column_is_told_of_every_cruise_and_a_row_only_of_its_own() -> None:
    delivery = two(
        {"NITRAT": "x"}, {"EXPOCODE": OTHER, "NITRAT": "y"}, OXYGEN="ML/L", DEPTH="", PHSPHT="umol/kilo"
    )
    for code, line in ((EXPOCODE, 4), (OTHER, 5)):
        part = delivery.of_cruise(code)
        assert len(told(part, "unit-converted", "bottle_oxygen")) == 1
        assert len(told(part, "unknown-unit", "phosphate")) == 1
        assert [finding.line for finding in told(part, "not-a-number")] == [line]


def test_many_unreadable_cells_are_counted_for_each_cruise() -> None:
    rows = [{"NITRAT": "x"}] * 60 + [{"EXPOCODE": OTHER, "NITRAT": "x"}] * 7
    delivery = two(*rows)
    assert sum(f.count for f in told(delivery, "not-a-number")) == 67
    assert sum(f.count for f in told(delivery.of_cruise(EXPOCODE), "not-a-number")) == 60
    assert sum(f.count for f in told(delivery.of_cruise(OTHER), "not-a-number")) == 7


def test_shifted_longitudes_are_counted_for_each_cruise() -> None:
    delivery = two({"LONGITUDE": "347.75"}, {}, *[{"EXPOCODE": OTHER, "LONGITUDE": "347.75"}] * 2)
    assert [told(delivery.of_cruise(code), "longitude-range")[0].count for code in (EXPOCODE, OTHER)] == [
        1,
        2,
    ]
    assert "2 longitudes above 180" in told(delivery.of_cruise(OTHER), "longitude-range")[0].message


def test_an_odd_flag_is_counted_for_each_cruise() -> None:
    toml = (
        '[[file]]\nfiles = "*"\nkind = "bottle"\nflags = "iode"\n[file.constants]\nstation = "1"\nlatitude = -35.5\n'
        'longitude = -12.25\n[file.columns]\ncruise = "expocode"\np = "pressure"\n'
        'n = { quantity = "nitrate", flag = "q" }\n'
    )
    text = "cruise,p,n,q\n" + "".join(f"{code},10,30,7\n" for code in (EXPOCODE, OTHER, OTHER))
    description = read_cruise_file("cruise.toml", toml.encode()).of("x.csv")
    delivery = read_delivery("x.csv", text.encode(), LIMITS, description)
    (finding,) = told(delivery.of_cruise(OTHER), "unknown-flag")
    assert (finding.count, finding.line) == (2, 3)
    (finding,) = told(delivery.of_cruise(EXPOCODE), "unknown-flag")
    assert (finding.count, finding.line) == (1, 2)


def test_the_same_spoiled_date_of_two_cruises_is_told_of_each() -> None:
    delivery = two({"DATE": "20091345"}, {"EXPOCODE": OTHER, "DATE": "20091345"})
    assert [told(delivery.of_cruise(code), "impossible-date")[0].line for code in (EXPOCODE, OTHER)] == [4, 5]


def test_values_outside_the_valid_range_of_a_variable_are_counted_for_each_cruise() -> None:
    def spoil(file: Any) -> None:
        file["nitrate"].valid_max = np.float64(1.0)
        file.delncattr("expocode")
        file.createDimension("letters", len(EXPOCODE))
        codes = file.createVariable("expocode", "S1", ("profile", "letters"))
        for profile, code in enumerate([EXPOCODE, OTHER, OTHER]):
            codes[profile] = np.array(list(code), dtype="S1")

    delivery = read_delivery("x.nc", netcdf_bytes(rows(), Plan(spoil=spoil)), LIMITS)
    counts = [told(delivery.of_cruise(code), "outside-valid-range")[0].count for code in (EXPOCODE, OTHER)]
    assert sum(counts) == told(delivery, "outside-valid-range")[0].count
    assert counts[0] in {2, 3}
