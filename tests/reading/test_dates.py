"""Dates that are not there, dates of two readings, and columns of time that hold the whole instant."""

from __future__ import annotations

import datetime as dt

import pytest

from pipeline.findings import Severity
from pipeline.reading import Delivery, read_cruise_file, read_delivery
from tests.invented import EXPOCODE, LIMITS, bottle_file, cast_file, checks, one, read, zipped
from tests.reading.netcdf_files import netcdf_bytes, rows

HEAD = """\
[[file]]
files = "*"
kind = "bottle"
[file.constants]
expocode = "ZZV120090214"
station = "1"
latitude = -35.5
longitude = -12.25
[file.columns]
p = { quantity = "pressure", unit = "dbar" }
"""


def table(columns: str, names: str, *cells: str) -> Delivery:
    description = read_cruise_file("cruise.toml", f"{HEAD}{columns}\n".encode()).of("x.csv")
    text = "\n".join([f"p,{names}", *(f"10,{cell}" for cell in cells)])
    return read_delivery("x.csv", text.encode(), LIMITS, description)


def told(delivery: Delivery, check: str) -> str:
    (finding,) = [f for f in delivery.findings if f.check == check]
    return finding.message


def test_a_column_of_time_that_holds_the_date_too_is_read_as_both() -> None:
    delivery = table('time = "time"', "time", "2009-02-15T03:30:00Z", "2009-02-15T04:30:00Z")
    assert one(delivery, "time") == dt.datetime(2009, 2, 15, 3, 30, tzinfo=dt.UTC)
    assert one(delivery, "date") == dt.date(2009, 2, 15)
    assert checks(delivery) == ["time-with-date"]
    assert told(delivery, "time-with-date") == (
        "x.csv, line 1: the column time is said to be the time of day and holds the date too, such as"
        " '2009-02-15T03:30:00Z'; no other column gives the date; it was read as date_and_time; say so in cruise.toml,"
        " line 11."
    )
    assert delivery.findings[0].severity is Severity.NOTE


def test_a_date_before_the_time_of_day_stands_back_behind_the_column_of_dates() -> None:
    columns = 'day = "date"\ntime = "time"'
    kept = table(columns, "day,time", "2009-02-15,1899-12-31T03:30:00", "2009-02-15,2009-02-15 04:30")
    assert one(kept, "time") == dt.datetime(2009, 2, 15, 3, 30, tzinfo=dt.UTC)
    assert not kept.findings
    doubted = table(columns, "day,time", "2009-02-15,2009-02-16 03:30", "2009-02-15,2009-02-15 04:30")
    assert one(doubted, "date") == dt.date(2009, 2, 15)
    assert told(doubted, "date-contradicts") == (
        "x.csv, line 2: time holds the date 2009-02-16, and day says 2009-02-15; expected one date; that of day was"
        " taken; ask which is right."
    )


def test_a_file_without_any_date_says_so() -> None:
    nothing = {"DATE": "", "TIME": ""}
    assert told(read(bottle_file(nothing, nothing)), "no-date") == (
        "cruise_hy1.csv: none of the 2 rows has a date; expected the date of every sample; ask for the dates and"
        " deliver the file again."
    )
    assert not [c for c in checks(read(bottle_file(nothing, {}))) if c == "no-date"]
    assert "no-date" in checks(read(cast_file(header={"DATE": ""}), "a_ct1.csv"))
    assert "no-date" in checks(table("", "x", "1"))
    assert "no-date" not in checks(read(bottle_file({"DATE": "20091345"})))  # told already
    other = {"EXPOCODE": "ZZV220100301"}
    of_two = read(bottle_file({}, {**nothing, **other}, {**nothing, **other}))
    assert "no-date" not in checks(of_two.of_cruise(EXPOCODE))
    assert "none of the 2 rows of ZZV220100301 has a date" in told(
        of_two.of_cruise("ZZV220100301"), "no-date"
    )


def test_a_netcdf_file_without_any_date_says_so_once() -> None:
    def spoil(file: object) -> None:
        file["time"].units = "fortnights since 2009-02-14"  # type: ignore[index]

    from tests.reading.netcdf_files import Plan  # noqa: PLC0415

    delivery = read_delivery("x.nc", netcdf_bytes(rows(), Plan(spoil=spoil)), LIMITS)
    assert [c for c in checks(delivery) if c in {"time-unit", "no-date"}] == ["time-unit"]


@pytest.mark.parametrize(
    ("expocode", "dates", "day", "words"),
    [
        # the departure decides
        ("ZZV120250101", ["02/01/2025", "03/01/2025"], dt.date(2025, 1, 2), "day first"),
        ("ZZV120250115", ["02/01/2025", "03/01/2025"], dt.date(2025, 2, 1), "month first"),
        ("ZZV120250115", ["05/02/2025"], dt.date(2025, 2, 5), "day first"),
        # the dates themselves
        ("ZZV120250101", ["02/01/2025", "14/01/2025"], dt.date(2025, 1, 2), "day first"),
        ("ZZV120250101", ["01/02/2025", "01/14/2025"], dt.date(2025, 1, 2), "month first"),
    ],
)
def test_what_decides_between_day_and_month_first_is_told(
    expocode: str, dates: list[str], day: dt.date, words: str
) -> None:
    delivery = read(bottle_file(*({"EXPOCODE": expocode, "DATE": date} for date in dates)))
    assert one(delivery, "date") == day
    assert f"were read {words}, because " in told(delivery, "date-order")
    assert {f.severity for f in delivery.findings} == {Severity.NOTE}


def test_where_nothing_decides_the_doubt_says_what_to_do() -> None:
    delivery = read(bottle_file({"DATE": "03/04/2009"}, {"DATE": "02/02/2009"}))
    assert one(delivery, "date") == dt.date(2009, 3, 4)
    assert told(delivery, "ambiguous-date") == (
        "cruise_hy1.csv: nothing in the file tells whether '03/04/2009' is written month first or day first; month"
        ' first was taken; expected YYYYMMDD; write "DATE" = { quantity = "date", format = "DD/MM/YYYY" } under'
        " [file.columns] of a cruise.toml where it is day first."
    )
    toml = '[[file]]\nfiles = "*"\n[file.columns]\n"DATE" = { quantity = "date", format = "DD/MM/YYYY" }\n'
    description = read_cruise_file("cruise.toml", toml.encode()).of("x")
    mended = read_delivery("c_hy1.csv", bottle_file({"DATE": "03/04/2009"}), LIMITS, description)
    assert one(mended, "date") == dt.date(2009, 4, 3)
    assert not mended.findings
    tabled = table('When = "date_and_time"', "When", "03.04.09 10:00")
    assert 'format = "DD.MM.YY hh:mm" } under [file.columns]' in told(tabled, "ambiguous-date")


def test_the_order_of_a_cast_of_a_zip_follows_its_departure() -> None:
    casts = {
        f"{n}_ct1.csv": cast_file(header={"STNNBR": str(n), "DATE": date, "EXPOCODE": "ZZV120250101"})
        for n, date in enumerate(["02/01/2025", "14/01/2025"])
    }
    delivery = read(zipped(casts), "all_ct1.zip")
    assert set(delivery.table.column("date").to_pylist()) == {dt.date(2025, 1, 2), dt.date(2025, 1, 14)}


def test_a_date_without_time_of_day_in_a_column_of_both_is_told() -> None:
    delivery = table('When = "date_and_time"', "When", "2009-02-15 03:30", "2009-02-15", "2009-02-16")
    assert delivery.table.column("time").null_count == 2
    assert told(delivery, "no-time-of-day") == (
        "x.csv, line 3: When is '2009-02-15' (and in 1 more row a date alone); expected date and time of day; the time"
        " of day is missing there."
    )


def test_a_latitude_that_is_written_with_its_side_is_told() -> None:
    text = HEAD.replace("latitude = -35.5\n", "")
    description = read_cruise_file("cruise.toml", f'{text}lat = "latitude"\n'.encode()).of("x.csv")
    data = b"p,lat\n10,-30.5\n20,30.5 S\n30,30 30 S\n"
    delivery = read_delivery("x.csv", data, LIMITS, description)
    assert delivery.table.column("latitude").to_pylist() == [-30.5, -30.5, -30.5]
    message = "x.csv, line 3: lat is '30.5 S' (and in 1 more row written so); it was read as -30.5 degrees."
    assert told(delivery, "position-written") == message
    exchange = read(bottle_file({"LATITUDE": "35.5S"}, {}))
    assert told(exchange, "position-written") == (
        "cruise_hy1.csv, line 4: LATITUDE is '35.5S'; it was read as -35.5 degrees."
    )
