"""What is made of columns: dates and positions in parts, depth for pressure, flags of other schemes, constants."""

from __future__ import annotations

import datetime as dt
from typing import TYPE_CHECKING, Any

import gsw
import pytest

from pipeline.problems import DeliveryProblem
from pipeline.reading import read_cruise_file, read_delivery, survey_cruises
from tests.invented import EXPOCODE, LIMITS, bottle_file, cast_file, checks, one, zipped

if TYPE_CHECKING:
    from collections.abc import Mapping

    from pipeline.reading import Delivery

GIVEN = {
    "expocode": f'"{EXPOCODE}"', "station": '"7"', "latitude": "-35.5", "longitude": "-12.25", "pressure": "10.5",
}  # fmt: skip


def read(
    columns: Mapping[str, tuple[str, str]], *, layout: str = "", joined: str = "", **constants: Any
) -> Delivery:
    """Read one row of columns, each with what is said of it and its cell."""
    said = {**GIVEN, **constants}
    given = "\n".join(f"{name} = {value}" for name, value in said.items() if value is not None)
    entries = "\n".join(f"{name} = {entry}" for name, (entry, _) in columns.items() if entry)
    toml = f'[[file]]\nfiles = "*"\nkind = "bottle"\ndelimiter = "tab"\n{layout}\n[file.constants]\n{given}\n'
    toml += f"[file.joined]\n{joined}\n[file.columns]\n{entries}\n"
    text = "\t".join(columns) + "\n" + "\t".join(cell for _, cell in columns.values()) + "\n"
    return read_delivery(
        "cruise.txt", text.encode(), LIMITS, read_cruise_file("cruise.toml", toml.encode()).of("x")
    )


def instant(day: int, hour: int, minute: int, second: int = 0) -> dt.datetime:
    return dt.datetime(2009, 2, day, hour, minute, second, tzinfo=dt.UTC)


@pytest.mark.parametrize(
    ("entry", "cell", "expected"),
    [
        ('"date_and_time"', "2009-02-14 08:03:00", instant(14, 8, 3)),
        ('"date_and_time"', "2009-02-14T08:03:07.25Z", instant(14, 8, 3, 7)),
        ('"date_and_time"', "2009-02-14T01:03+02:00", instant(13, 23, 3)),
        ('"date_and_time"', "200902140803", instant(14, 8, 3)),
        ('"date_and_time"', "14/2/2009 8:03", instant(14, 8, 3)),
        ('{ quantity = "date_and_time", format = "DD.MM.YYYY hh:mm" }', "4.2.2009 8:03", instant(4, 8, 3)),
        ('{ quantity = "date_and_time", format = "MMM DD YY, hh-mm" }', "Feb 4 09, 8-03", instant(4, 8, 3)),
        ('{ quantity = "date_and_time", format = "YYYYDDDThhmm" }', "2009045T0803", instant(14, 8, 3)),
    ],
)
def test_date_and_time_in_one_column(entry: str, cell: str, expected: dt.datetime) -> None:
    delivery = read({"When": (entry, cell)})
    assert one(delivery, "time") == expected
    assert one(delivery, "date") == expected.date()
    assert set(checks(delivery)) <= {"date-order"}


@pytest.mark.parametrize(
    ("cells", "expected"),
    [
        ({"year": "2009", "month": "2", "day": "14"}, None),
        ({"year": "2009", "month": "2", "day": "14", "hour": "8", "minute": "3"}, instant(14, 8, 3)),
        ({"year": "09", "month": "Feb", "day": "14", "hour": "8.05"}, instant(14, 8, 3)),
        (
            {"year": "2009", "day_of_year": "45", "hour": "8", "minute": "3", "second": "7"},
            instant(14, 8, 3, 7),
        ),
        ({"year": "2009", "day_of_year": "45.3354166667"}, instant(14, 8, 3)),
        ({"year": "2009.0", "month": "2.0", "day": "14.0", "hour": "24.0"}, instant(15, 0, 0)),
    ],
)
def test_dates_in_parts(cells: dict[str, str], expected: dt.datetime | None) -> None:
    delivery = read({f"c{name}": (f'"{name}"', cell) for name, cell in cells.items()})
    assert one(delivery, "date") == dt.date(2009, 2, 14)
    assert one(delivery, "time") == expected
    assert not delivery.findings


def test_a_year_may_be_the_same_for_all() -> None:
    delivery = read({"m": ('"month"', "2"), "d": ('"day"', "14")}, year="2009")
    assert one(delivery, "date") == dt.date(2009, 2, 14)


@pytest.mark.parametrize(
    ("columns", "words"),
    [
        (
            {"D": ('{ quantity = "date", format = "DD.MM.YYYY" }', "2009/2/14")},
            "D is 'not DD.MM.YYYY: 2009/2/14'",
        ),
        ({"y": ('"year"', "2009"), "m": ('"month"', "13"), "d": ('"day"', "1")}, "'20091301'"),
        ({"y": ('"year"', "2009"), "n": ('"day_of_year"', "366")}, "'day 366 of 2009'"),
        ({"y": ('"year"', "MMIX"), "m": ('"month"', "1"), "d": ('"day"', "1")}, "'MMIX-1-1'"),
        ({"W": ('"date_and_time"', "yesterday")}, "'yesterday'"),
    ],
)
def test_dates_that_cannot_be_read_are_told(columns: dict[str, tuple[str, str]], words: str) -> None:
    delivery = read(columns)
    assert one(delivery, "date") is None
    assert checks(delivery) == ["impossible-date"]
    assert words in delivery.findings[0].message


def test_local_time_is_moved_to_utc_and_takes_the_date_with_it() -> None:
    columns = {"D": ('"date"', "20090214"), "T": ('"time"', "0130")}
    delivery = read(columns, layout='time_zone = "+02:00"')
    assert one(delivery, "time") == instant(13, 23, 30)
    assert one(delivery, "date") == dt.date(2009, 2, 13)


@pytest.mark.parametrize(
    ("columns", "latitude"),
    [
        ({"L": ('"latitude"', "35 30.0 S")}, -35.5),
        ({"L": ('"latitude"', "35°30.0'S")}, -35.5),
        ({"L": ('"latitude"', "-35.5")}, -35.5),
        ({"L": ('"latitude"', "35.5"), "H": ('"latitude_hemisphere"', "South")}, -35.5),
        ({"L": ('"latitude"', "-35.5"), "H": ('"latitude_hemisphere"', "S")}, -35.5),
        ({"D": ('"latitude_degrees"', "-35"), "M": ('"latitude_minutes"', "30")}, -35.5),
        ({"D": ('"latitude_degrees"', "-0"), "M": ('"latitude_minutes"', "30.0")}, -0.5),
        ({"D": ('"latitude_degrees"', "35.0"), "M": ('"latitude_minutes"', "15.0"),
          "S": ('"latitude_seconds"', "36"), "H": ('"latitude_hemisphere"', "N")}, 35.26),
    ],
)  # fmt: skip
def test_positions_as_written(columns: dict[str, tuple[str, str]], latitude: float) -> None:
    assert one(read(columns, latitude=None), "latitude") == pytest.approx(latitude, abs=1e-12)


@pytest.mark.parametrize(
    "columns",
    [
        {"L": ('"latitude"', "-35.5"), "H": ('"latitude_hemisphere"', "N")},
        {"L": ('"latitude"', "35.5"), "H": ('"latitude_hemisphere"', "E")},
        {"D": ('"latitude_degrees"', "35"), "M": ('"latitude_minutes"', "61")},
        {"L": ('"latitude"', ""), "N": ("", "1")},
    ],
)
def test_positions_that_are_none(columns: dict[str, tuple[str, str]]) -> None:
    with pytest.raises(DeliveryProblem, match="none of its 1 rows can be used"):
        read(columns, latitude=None)


def test_depth_in_place_of_pressure() -> None:
    delivery = read({"Depth (m)": ("", "1000")} | {'"Depth of sample"': ('"depth"', "1000")}, pressure=None)
    assert one(delivery, "pressure") == pytest.approx(gsw.p_from_z(-1000.0, -35.5), abs=1e-9)
    assert "pressure-from-depth" in checks(delivery)


def test_flags_of_another_scheme() -> None:
    entry = '{ quantity = "nitrate", unit = "umol/kg", flag = "Q", flags = "iode" }'
    delivery = read({"N": (entry, "30.0"), "Q": ("", "1")})
    assert one(delivery, "nitrate_flag") == 2
    assert one(delivery, "Q") == 1
    metadata = delivery.table.schema.field("nitrate_flag").metadata
    assert metadata[b"delivered_flags"] == b"iode"
    assert b"1 as 2" in metadata[b"conversion"]
    assert metadata[b"long_name"] == b"Nitrate: flag, from Q as delivered"
    odd = read({"N": (entry, "30.0"), "Q": ("", "B")})
    assert one(odd, "nitrate_flag") == 3
    assert one(odd, "Q") == "B"
    assert odd.findings[0].message == (
        "cruise.txt, line 2: the flag Q is 'B'; expected one of 1, 2, 3, 4, 9 (iode); it counts as not good."
    )


def test_one_column_of_flags_for_two_quantities() -> None:
    columns = {
        "N": ('{ quantity = "nitrate", unit = "umol/kg", flag = "Q" }', "30.0"),
        "P": ('{ quantity = "phosphate", unit = "umol/kg", flag = "Q" }', "2.0"),
        "Q": ("", "3"),
    }
    delivery = read(columns)
    assert (one(delivery, "nitrate_flag"), one(delivery, "phosphate_flag")) == (3, 3)


def test_identity_joined_of_columns() -> None:
    columns = {"Leg": ("", "2"), "Stop": ("", "b")}
    assert one(read(columns, joined='station = ["Leg", "Stop"]', station=None), "station") == "2_b"


def test_the_laboratory_temperature_is_that_of_the_file() -> None:
    columns = {
        "N": ('{ quantity = "nitrate", unit = "umol/l" }', "30.0"),
        "S": ('"bottle_salinity"', "35.0"),
    }
    warm, cold = (
        one(read(columns, laboratory_temperature=degrees), "nitrate") for degrees in ("25.0", "5.0")
    )
    reference = gsw.SR_from_SP(35.0)
    assert warm == pytest.approx(30e3 / gsw.rho_t_exact(reference, 25.0, 0.0), rel=1e-12)
    assert cold == pytest.approx(30e3 / gsw.rho_t_exact(reference, 5.0, 0.0), rel=1e-12)


def test_what_nobody_gives_is_asked_for() -> None:
    with pytest.raises(DeliveryProblem) as caught:
        read({"N": ('"nitrate"', "30.0")}, station=None)
    assert str(caught.value) == (
        "cruise.txt, line 1: there is no station; expected it among the columns and constants that cruise.toml gives;"
        " add it and deliver the file again."
    )


def exchange(toml: str, data: bytes, name: str = "cruise_hy1.csv") -> Delivery:
    said = read_cruise_file("cruise.toml", f'[[file]]\nfiles = "*"\n{toml}'.encode())
    return read_delivery(name, data, LIMITS, said.of(name))


def test_an_expocode_that_a_spreadsheet_spoiled_is_given_by_the_user() -> None:
    spoiled = bottle_file({"EXPOCODE": "3.2062E+11"}, {"EXPOCODE": "3.2062E+11"})
    delivery = exchange(f'[file.constants]\nexpocode = "{EXPOCODE}"', spoiled)
    assert delivery.cruises == (EXPOCODE,)
    assert delivery.table.num_rows == 2
    (finding,) = delivery.findings
    assert finding.message == (
        f"cruise_hy1.csv, line 2: expocode is '{EXPOCODE}' for all rows, as cruise.toml says, in place of '3.2062E+11'"
        " in the column EXPOCODE."
    )
    toml = f'[[file]]\nfiles = "*"\n[file.constants]\nexpocode = "{EXPOCODE}"'.encode()
    said = read_cruise_file("cruise.toml", toml).of("x")
    assert survey_cruises("cruise_hy1.csv", spoiled, LIMITS, said) == (EXPOCODE,)


def test_the_expocode_of_a_cast_and_of_a_zip_of_casts() -> None:
    toml = f'[file.constants]\nexpocode = "{EXPOCODE}"'
    cast = cast_file(header={"EXPOCODE": "3E11"})
    assert exchange(toml, cast, "a_ct1.csv").cruises == (EXPOCODE,)
    assert exchange(toml, zipped({"a_ct1.csv": cast}), "a_ct1.zip").cruises == (EXPOCODE,)


def test_columns_of_an_exchange_file_given_anew() -> None:
    data = bottle_file({"MYNITRATE": "31.0", "Q": "1"}, extra={"MYNITRATE": "UMOL/KG", "Q": ""})
    delivery = exchange(
        '[file.columns]\nMYNITRATE = { quantity = "nitrate", flag = "Q", flags = "iode" }', data
    )
    assert (one(delivery, "nitrate"), one(delivery, "nitrate_flag")) == (31.0, 2)
    assert (one(delivery, "NITRAT"), one(delivery, "NITRAT_FLAG_W")) == (30.0, 2)


def test_a_unit_of_an_exchange_file_given_anew() -> None:
    delivery = exchange('[file.columns]\nNITRAT = { quantity = "nitrate", unit = "umol/l" }', bottle_file())
    assert 29.0 < float(str(one(delivery, "nitrate"))) < 29.5
    assert one(delivery, "nitrate_flag") == 2


def test_a_description_of_the_other_kind() -> None:
    with pytest.raises(
        DeliveryProblem, match="found the stamp of a bottle file; expected kind ctd, as cruise"
    ):
        exchange('kind = "ctd"', bottle_file())


@pytest.mark.parametrize("depth", ["-9.5", "20000", "1e400", "-inf", "x"])
def test_a_depth_where_no_sample_was_taken_rejects_the_row(depth: str) -> None:
    with pytest.raises(DeliveryProblem, match=r"the pressure \(D\) is"):
        read({"D": ('"depth"', depth)}, pressure=None)


def test_a_level_of_a_cast_has_no_bottle_and_loses_no_column() -> None:
    toml = b"""
[[file]]
files = "*"
kind = "ctd"
[file.constants]
expocode = "ZZV120090214"
latitude = -35.5
longitude = -12.25
[file.columns]
S = "station"
N = "sample"
P = { quantity = "pressure", unit = "dbar" }
T = { quantity = "temperature", unit = "ITS-90", flag = "Q", flags = "argo" }
"""
    said = read_cruise_file("cruise.toml", toml).of("casts.csv")
    delivery = read_delivery("casts.csv", b"S,N,P,T,Q\n7,12,10.5,4.5,8\n", LIMITS, said)
    assert delivery.kind == "ctd"
    assert (one(delivery, "N"), one(delivery, "temperature_flag"), one(delivery, "Q")) == (12, 6, 8)
    assert "sample" not in delivery.table.column_names
