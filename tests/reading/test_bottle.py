from __future__ import annotations

from datetime import UTC, date, datetime

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.problems import DeliveryProblem
from tests.invented import EXPOCODE, NAMES, ROW, bottle_file, checks, one, read


def test_a_plain_row_is_read_under_registry_names() -> None:
    delivery = read(bottle_file())
    assert delivery.cruises == (EXPOCODE,)
    assert delivery.rows == 1
    assert not delivery.rejects
    assert not delivery.findings
    expected = {
        "station": "1", "cast": 1, "sample": "1", "bottle": "1", "bottle_flag": 2, "date": date(2009, 2, 14),
        "time": datetime(2009, 2, 14, 8, 3, tzinfo=UTC), "latitude": -35.5, "longitude": -12.25,
        "bottom_depth": 4100.0, "pressure": 1000.0, "temperature": 4.0, "ctd_salinity": 34.5,
        "bottle_salinity": 34.501, "bottle_oxygen": 200.0, "nitrate": 30.0, "nitrate_flag": 2, "phosphate": 2.0,
        "file": "cruise_hy1.csv", "line": 4,
    }  # fmt: skip
    assert {name: one(delivery, name) for name in expected} == expected


@pytest.mark.parametrize(
    "written", ["-999", "-999.0", "-999.00", "-999.000", " -999.0000 ", "", "  ", "NaN", "-9999"]
)
def test_missing_is_null_however_it_is_written(written: str) -> None:
    delivery = read(bottle_file({"NITRAT": written, "NITRAT_FLAG_W": "9"}))
    assert one(delivery, "nitrate") is None
    assert one(delivery, "nitrate_flag") == 9
    assert not delivery.findings


def test_minus_nine_is_missing_under_flag_nine_and_a_value_where_it_can_be_one() -> None:
    delivery = read(
        bottle_file(
            {"NITRAT": "-9", "NITRAT_FLAG_W": "9", "DELC14": "-9.0", "DELC14_FLAG_W": "2"},
            {"DELC14": "-9.0", "DELC14_FLAG_W": "9"},
            extra={"DELC14": "/MILLE", "DELC14_FLAG_W": ""},
        )
    )
    assert one(delivery, "nitrate") is None
    assert one(delivery, "delta_carbon_14") == -9.0
    assert one(delivery, "delta_carbon_14", 1) is None


def test_a_value_that_is_no_number_is_told_and_the_row_stays() -> None:
    delivery = read(bottle_file({"NITRAT": "3o.1"}, {}))
    assert delivery.table.num_rows == 2
    assert one(delivery, "nitrate") is None
    assert one(delivery, "phosphate") == 2.0
    (finding,) = delivery.findings
    assert finding.check == "not-a-number"
    assert finding.message == (
        "cruise_hy1.csv, line 4: NITRAT is '3o.1'; expected a number; it counts as missing."
    )
    assert (finding.station, finding.cast, finding.sample, finding.variable) == ("1", 1, "1", "nitrate")


@pytest.mark.parametrize(
    ("changed", "reason", "words"),
    [
        ({"STNNBR": ""}, "no-station", "the station (STNNBR) is missing"),
        ({"CASTNO": "one"}, "no-cast", "the cast (CASTNO) is 'one'"),
        ({"LATITUDE": "95.0"}, "no-position", "the position is '95, -12.25'"),
        ({"LONGITUDE": "-999.0000"}, "no-position", "the position is '-35.5, -999'"),
        ({"CTDPRS": "-999.0"}, "no-pressure", "the pressure (CTDPRS) is missing"),
        ({"EXPOCODE": "../x"}, "no-expocode", "the EXPOCODE is '../x'"),
    ],
)
def test_a_row_that_cannot_be_used_is_kept_as_text_with_its_reason(
    changed: dict[str, str], reason: str, words: str
) -> None:
    data = bottle_file({}, changed, {})
    delivery = read(data)
    assert delivery.table.num_rows == 2
    (reject,) = delivery.rejects
    assert (reject.line, reject.reason) == (5, reason)
    assert reject.raw == data.decode().splitlines()[4]
    assert words in reject.message


def test_rows_of_a_wrong_width_are_rejected_and_lines_stay_right() -> None:
    lines = bottle_file({}, {}, {}).decode().splitlines()
    lines[4] += ",7"
    lines.insert(4, "")
    delivery = read("\n".join(lines).encode())
    (reject,) = delivery.rejects
    assert (reject.line, reject.reason) == (6, "field-count")
    assert f"found {len(NAMES) + 1} fields; expected {len(NAMES)}" in reject.message
    assert delivery.table.column("line").to_pylist() == [4, 7]


def test_a_trailing_comma_on_every_line_is_no_column() -> None:
    data = b"\n".join(
        line + b"," if line.count(b",") > 3 else line for line in bottle_file({}, {}).splitlines()
    )
    delivery = read(data)
    assert delivery.table.num_rows == 2
    assert not any(name.startswith("unnamed") for name in delivery.table.column_names)


@pytest.mark.parametrize(
    ("changed", "day", "hour"),
    [
        ({"DATE": "20131226.0", "TIME": "803"}, date(2013, 12, 26), "08:03:00"),
        ({"DATE": "5/14/2007", "TIME": "26"}, date(2007, 5, 14), "00:26:00"),
        ({"DATE": "14/5/07", "TIME": "8:14:04"}, date(2007, 5, 14), "08:14:04"),
        ({"DATE": "2007-05-14", "TIME": "0"}, date(2007, 5, 14), "00:00:00"),
    ],
)
def test_dates_and_times_as_found(changed: dict[str, str], day: date, hour: str) -> None:
    delivery = read(bottle_file(changed))
    instant = one(delivery, "time")
    assert isinstance(instant, datetime)
    assert (one(delivery, "date"), instant.strftime("%H:%M:%S")) == (day, hour)
    assert set(checks(delivery)) <= {"date-order"}


def test_twenty_four_hundred_is_the_next_day() -> None:
    delivery = read(bottle_file({"DATE": "20081231", "TIME": "2400"}))
    assert one(delivery, "time") == datetime(2009, 1, 1, tzinfo=UTC)
    assert one(delivery, "date") == date(2008, 12, 31)


def test_an_unknown_time_is_not_midnight() -> None:
    delivery = read(bottle_file({"TIME": ""}))
    assert one(delivery, "time") is None
    assert one(delivery, "date") == date(2009, 2, 14)


def test_impossible_dates_and_times_are_told_and_the_row_stays() -> None:
    delivery = read(bottle_file({"DATE": "20090230"}, {"TIME": "1375"}))
    assert checks(delivery) == ["impossible-date", "impossible-time"]
    assert delivery.findings[0].message == (
        "cruise_hy1.csv, line 4: DATE is '20090230'; expected a date YYYYMMDD that exists; it counts as missing."
    )
    assert one(delivery, "date") is None
    assert one(delivery, "time", 1) is None


def test_a_date_that_could_be_read_two_ways_is_doubted() -> None:
    delivery = read(bottle_file({"DATE": "8/5/13"}))
    assert one(delivery, "date") == date(2013, 8, 5)
    assert checks(delivery) == ["ambiguous-date"]


@pytest.mark.parametrize("end", ["END_DATA,,,,\n", "END_DATA", "  end_data\n", "END_DATA\n\n\n"])
def test_the_end_mark_as_found(end: str) -> None:
    assert not read(bottle_file(end=end)).findings


def test_a_missing_end_mark_is_noted() -> None:
    assert checks(read(bottle_file(end=""))) == ["no-end-mark"]


@pytest.mark.parametrize("ending", [b"\r\n", b"\r"])
def test_line_ends(ending: bytes) -> None:
    delivery = read(bottle_file({}, {"SAMPNO": "2"}).replace(b"\n", ending))
    assert delivery.table.column("line").to_pylist() == [4, 5]
    assert not delivery.findings


def test_byte_order_mark_comments_padding_and_latin_1() -> None:
    data = bottle_file({"STNNBR": "  42.5 ", "EXPOCODE": f"  {EXPOCODE} ", "SALNTY_FLAG_W": " 2 "})
    stamp, rest = data.split(b"\n", 1)
    comments = "# Größe, °C, 100 µmol\n#|x,y,,,\n\n".encode("latin-1")
    delivery = read(b"\xef\xbb\xbf" + stamp + b",,,,\n" + comments + rest)
    assert one(delivery, "station") == "42.5"
    assert one(delivery, "line") == 7
    assert delivery.cruises == (EXPOCODE,)
    assert checks(delivery) == ["encoding-assumed"]


def test_semicolons_and_decimal_commas() -> None:
    data = bottle_file().replace(b",", b";").replace(b".", b",")
    delivery = read(data)
    assert one(delivery, "bottle_salinity") == 34.501
    assert one(delivery, "latitude") == -35.5


def test_units_above_the_names() -> None:
    stamp, names, units, *rest = bottle_file().split(b"\n")
    delivery = read(b"\n".join([stamp, units, names, *rest]))
    assert one(delivery, "nitrate") == 30.0
    assert checks(delivery) == ["units-above-names"]


def test_no_units() -> None:
    stamp, names, _, *rest = bottle_file().split(b"\n")
    delivery = read(b"\n".join([stamp, names, *rest]))
    assert one(delivery, "nitrate") == 30.0
    assert checks(delivery) == ["no-units"]


def test_longitudes_beyond_180_are_degrees_east() -> None:
    delivery = read(bottle_file({"LONGITUDE": "347.75"}, {"LONGITUDE": "180.0"}))
    assert delivery.table.column("longitude").to_pylist() == [-12.25, 180.0]
    assert checks(delivery) == ["longitude-range"]


def test_columns_nobody_knows_pass_through() -> None:
    delivery = read(
        bottle_file(
            {"GLOWWORMS": " 12.5", "GLOWWORMS_FLAG_W": "2", "NICKNAME": "Ida", "odd name": "-999.00"},
            extra={"GLOWWORMS": "1/L", "GLOWWORMS_FLAG_W": "", "NICKNAME": "", "odd name": ""},
        )
    )
    assert one(delivery, "GLOWWORMS") == 12.5
    assert one(delivery, "NICKNAME") == "Ida"
    assert one(delivery, "odd name") is None
    assert delivery.table.schema.field("GLOWWORMS").metadata[b"units"] == b"1/L"


def test_a_delivered_column_never_hides_one_of_ours() -> None:
    delivery = read(bottle_file({"sigma0": "27.1"}, extra={"sigma0": "KG/M^3"}))
    assert one(delivery, "sigma0_delivered") == 27.1
    assert "sigma0" not in delivery.table.column_names


@pytest.mark.parametrize("spelling", ["CFC 11", "cfc-11", "CFC_11"])
def test_names_with_odd_spelling(spelling: str) -> None:
    delivery = read(
        bottle_file(
            {spelling: "2.5", f"{spelling}_FLAG_W": "3"},
            extra={spelling: "PMOL/KG", f"{spelling}_FLAG_W": ""},
        )
    )
    assert one(delivery, "cfc11") == 2.5
    assert one(delivery, "cfc11_flag") == 3
    assert checks(delivery) == ["column-spelling"]


def test_the_bottle_stands_in_for_a_missing_sample_number() -> None:
    names = [name for name in NAMES if name != "SAMPNO"]
    assert one(read(bottle_file({"BTLNBR": "17"}, names=names)), "sample") == "17"
    assert one(read(bottle_file({"SAMPNO": "-999", "BTLNBR": "17"})), "sample") == "17"


@pytest.mark.parametrize(
    "code",
    ["316N138/12", "316N138_7", "31DSCG96_1", "09AR9407_1", "325020080826", "18DD9403.1", "096u20160426"],
)
def test_expocodes_as_found(code: str) -> None:
    assert read(bottle_file({"EXPOCODE": code})).cruises == (code.upper(),)


@pytest.mark.parametrize(
    "code", ["../x", "/etc/x", "a/../b", "x/../../y", "C:\\x", "..", ".x", "3.2E11", "-999", "A" * 41]
)
def test_expocodes_that_are_none(code: str) -> None:
    with pytest.raises(DeliveryProblem):
        read(bottle_file({"EXPOCODE": code}))


def test_two_cruises_in_one_file() -> None:
    delivery = read(
        bottle_file({}, {"EXPOCODE": "ZZV220210301"}, {}, {"EXPOCODE": "ZZV220210301", "STNNBR": ""})
    )
    assert delivery.cruises == (EXPOCODE, "ZZV220210301")
    first, second = (delivery.of_cruise(code) for code in delivery.cruises)
    assert (first.rows, len(first.rejects)) == (2, 0)
    assert (second.rows, len(second.rejects)) == (2, 1)
    assert first.rows + second.rows == delivery.rows


@pytest.mark.parametrize(
    ("data", "reason", "words"),
    [
        (b"", "empty-file", "found an empty file; expected a cruise file"),
        (b" \n \n", "empty-file", "found an empty file"),
        (b"station,depth\n1,2\n", "not-a-cruise-file", "line 1: found 'station,depth'"),
        (b"\x89HDF\r\n\x1a\n\0\0\0", "broken-netcdf", "the NetCDF file is cut or spoiled"),
        (b"," * 10_000_000, "not-a-cruise-file", "line 1: found"),
        (
            b"BOTTLE,2026\n" + b"EXPOCODE,STNNBR" + b"," * 10_000_000,
            "too-many-columns",
            "found 10000002 columns",
        ),
        (
            bottle_file({"EXPOCODE": "3.2062E+11"}),
            "spoiled-expocode",
            "turned into a number by a spreadsheet",
        ),
        (
            bottle_file({"EXPOCODE": "../x"}),
            "path-expocode",
            "line 4: the EXPOCODE '../x' cannot name a cruise",
        ),
        (bottle_file({"EXPOCODE": ""}), "no-expocode", "line 4: the EXPOCODE is empty"),
        (bottle_file(names=NAMES[1:]), "no-expocode", "line 2: there is no EXPOCODE"),
        (
            bottle_file(names=[name for name in NAMES if name != "CTDPRS"]),
            "no-pressure",
            "line 2: there is no CTDPRS",
        ),
        (
            bottle_file({"NITRAT": "1"}, names=[*NAMES, "NITRAT"]),
            "repeated-column",
            "the column 'NITRAT' stands twice, as columns 21 and 25",
        ),
        (bottle_file({"STNNBR": ""}), "no-station", "none of its 1 rows can be used"),
        (b"\n".join(bottle_file().splitlines()[:3]) + b"\nEND_DATA\n", "no-rows", "there are no data rows"),
        (b"BOTTLE,2026\nhello world\nEND_DATA\n", "not-a-cruise-file", "expected the line of column names"),
    ],
)
def test_files_refused_whole(data: bytes, reason: str, words: str) -> None:
    with pytest.raises(DeliveryProblem) as caught:
        read(data)
    assert caught.value.reason == reason
    assert words in str(caught.value)
    assert str(caught.value).startswith("cruise_hy1.csv")
    assert "\n" not in str(caught.value)


_LINES = bottle_file({}, {"SAMPNO": "2", "NITRAT": "-999", "NITRAT_FLAG_W": "9"}, {"SAMPNO": "3"})


@settings(max_examples=300, deadline=None, derandomize=True)
@given(
    cut=st.integers(0, len(_LINES)),
    at=st.integers(0, len(_LINES) - 1),
    junk=st.binary(max_size=8) | st.sampled_from([b",", b"\n", b'"', b"\r", b"-999", b"\xff", b";", b"#"]),
    reps=st.integers(1, 30),
)
def test_spoiled_bytes_are_refused_or_accounted_for(cut: int, at: int, junk: bytes, reps: int) -> None:
    data = _LINES[:at] + junk * reps + _LINES[at : max(cut, at)]
    try:
        delivery = read(data)
    except DeliveryProblem:
        return
    assert delivery.rows == delivery.table.num_rows + len(delivery.rejects)


@settings(max_examples=60, deadline=None, derandomize=True)
@given(
    values=st.lists(
        st.floats(-0.09, 46, allow_nan=False).map(lambda value: round(value, 4)), min_size=1, max_size=30
    ),
    pad=st.integers(0, 6),
)
def test_numbers_come_back_as_written(values: list[float], pad: int) -> None:
    rows = [{"NITRAT": " " * pad + f"{value:.4f}"} for value in values]
    assert read(bottle_file(*rows)).table.column("nitrate").to_pylist() == values


def test_row_template_is_complete() -> None:
    assert list(ROW) == NAMES


def test_a_last_line_of_nothing_but_a_quote_is_no_row() -> None:
    delivery = read(bottle_file({}, {}, end='"\n'))
    assert delivery.rows == delivery.table.num_rows == 2


def test_large_numbers_of_a_column_nobody_knows_pass_through() -> None:
    delivery = read(bottle_file({"CODE": "201312261234"}, {"CODE": "-1e10"}, extra={"CODE": ""}))
    assert delivery.table.column("CODE").to_pylist() == [201312261234.0, None]


def test_every_measured_column_says_how_the_file_calls_it() -> None:
    table = read(bottle_file(units={"NITRAT": "UMOL/L"})).table
    assert table.schema.field("nitrate").metadata[b"delivered_name"] == b"NITRAT"
    assert table.schema.field("nitrate").metadata[b"delivered_units"] == b"UMOL/L"
    assert table.schema.field("phosphate").metadata[b"delivered_units"] == b"UMOL/KG"
