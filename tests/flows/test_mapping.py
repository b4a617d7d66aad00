"""The command that drafts a description: what it guesses, what it doubts, and that it can be finished and used."""

from __future__ import annotations

import re
import tomllib
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pyarrow.parquet as pq
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from pipeline.problems import DeliveryProblem
from pipeline.reading import read_cruise_file, read_delivery
from pipeline.reading.draft import draft_description
from pipeline.reading.schemes import Scheme, guess_scheme
from tests.flows.conftest import call
from tests.invented import EXPOCODE, LIMITS, bottle_file, cast_file, zipped
from tests.reading.tables import as_parquet, as_text, as_workbook

if TYPE_CHECKING:
    from pathlib import Path

FILLED = {
    "expocode": f'"{EXPOCODE}"', "station": '"1"', "latitude": "-35.5", "longitude": "-12.25", "pressure": "10.0",
}  # fmt: skip


def filled(draft: str) -> str:
    """Return a draft with its blanks filled in."""
    return re.sub(
        r'^(\w+) = "FILL IN"', lambda match: f"{match[1]} = {FILLED[match[1]]}", draft, flags=re.MULTILINE
    )


def entries(draft: str) -> dict[str, str]:
    """Return which column a draft takes for which quantity."""
    columns = tomllib.loads(draft)["file"][0]["columns"]
    return {column: said if isinstance(said, str) else said["quantity"] for column, said in columns.items()}


WANTED = {
    "Station": "station", "Cast": "cast", "Sample": "sample", "Bottle": "bottle", "Day": "date", "Clock": "time",
    "Lat": "latitude", "Lon": "longitude", "Bottom": "bottom_depth", "Pressure": "pressure", "Temp": "temperature",
    "Salinity": "ctd_salinity", "Oxygen": "bottle_oxygen", "Nitrate": "nitrate",
}  # fmt: skip


@pytest.mark.parametrize(
    ("name", "data"),
    [
        ("cruise.csv", as_text()), ("cruise.txt", as_text(delimiter=";", decimal=",")),
        ("cruise.tsv", as_text(delimiter="\t")), ("cruise.xlsx", as_workbook()), ("cruise.parquet", as_parquet()),
    ],
)  # fmt: skip
def test_a_draft_that_is_filled_in_reads_the_file(name: str, data: bytes, tmp_path: Path) -> None:
    path = tmp_path / name
    path.write_bytes(data)
    drafted = call("mapping", path)
    assert drafted.status == 0
    found = entries(drafted.out)
    assert {column: found.get(column) for column in WANTED if column != "Day"} | {"Day": "date"} == WANTED
    assert "doubt: flags of the scheme whp?" in drafted.out
    assert "or is it bottle_salinity?" in drafted.out
    (tmp_path / "cruise.toml").write_text(filled(drafted.out), encoding="utf-8")
    checked = call("check", path)
    assert checked.status == 0
    assert f"bottle file of {EXPOCODE}; 4 rows, 4 kept, 0 rejected" in checked.out
    assert "bottle_oxygen, nitrate" in checked.out


def test_a_draft_with_its_blanks_is_not_used(tmp_path: Path) -> None:
    path = tmp_path / "cruise.csv"
    path.write_bytes(as_text())
    assert call("mapping", path, "--out", tmp_path / "cruise.toml").status == 0
    checked = call("check", path)
    assert checked.status == 1
    assert "expocode is still 'FILL IN', as the draft has it; expected the code of the cruise" in checked.out


def test_nothing_is_overwritten(tmp_path: Path) -> None:
    path = tmp_path / "cruise.csv"
    path.write_bytes(as_text())
    out = tmp_path / "cruise.toml"
    out.write_text("mine", encoding="utf-8")
    outcome = call("mapping", path, "--out", out)
    assert (outcome.status, out.read_text(encoding="utf-8")) == (2, "mine")
    assert "there is such a file already; it was left as it is" in outcome.err


def test_what_cannot_be_drafted(tmp_path: Path) -> None:
    assert "cannot be read (No such file or directory)" in call("mapping", tmp_path / "none.csv").err
    path = tmp_path / "cruise.bin"
    path.write_bytes(b"\0" * 100)
    outcome = call("mapping", path)
    assert outcome.status == 1
    assert outcome.out.startswith("refused: cruise.bin: found ")


def test_a_preamble_units_and_words_for_missing() -> None:
    text = """\
Invented sea, bottles; not for navigation
# of no cruise
Stat;Depth [m];NO3;QC_NO3;PO4;Mystery;Weird
;;umol/l;;umol/l;umol/kg;
1;10;30,5;1;2,1;2100,5;a
1;20;n.d.;9;-9;2110,5;b
2;30;<0,1;1;-9;2120,5;c
2;40;29,5;1;2,3;2130,5;d
"""
    draft = draft_description("nutrients.csv", text.encode(), LIMITS)
    layout = tomllib.loads(draft)["file"][0]
    expected = {
        "delimiter": "semicolon", "decimal": ",", "names_line": 3, "units_line": 4, "first_line": 5, "comment": "#",
    }  # fmt: skip
    assert {key: layout[key] for key in expected} == expected
    assert layout["columns"]["NO3"] == {
        "quantity": "nitrate", "unit": "umol/l", "flag": "QC_NO3", "flags": "iode", "missing": ["n.d."],
    }  # fmt: skip
    assert layout["columns"]["PO4"]["missing"] == [-9]
    assert layout["columns"]["Depth [m]"] == {"quantity": "depth", "unit": "m"}
    assert '# "Mystery" = ' in draft
    assert "by its unit 'umol/kg' and range it could be dic, alkalinity" in draft
    assert "doubt: <0,1 is no number" in draft
    assert 'expocode = "FILL IN"' in draft
    assert layout["kind"] == "bottle"


def test_dates_that_may_be_read_two_ways_are_doubted() -> None:
    text = "date,pressure\n3/4/2009,5\n5/6/2009,10\n"
    assert 'say format = "DD/MM/YYYY" or "MM/DD/YYYY"' in draft_description("a.csv", text.encode(), LIMITS)
    told = draft_description("a.csv", text.replace("5/6", "25/6").encode(), LIMITS)
    assert tomllib.loads(told)["file"][0]["columns"]["date"] == {"quantity": "date", "format": "DD/MM/YYYY"}


def test_files_that_need_no_description_say_so() -> None:
    assert "needs no description" in draft_description("a_hy1.csv", bottle_file(extra={"ODD": "M"}), LIMITS)
    spoiled = draft_description("a_hy1.csv", bottle_file({"EXPOCODE": "3E11"}), LIMITS)
    assert "expocode = \"FILL IN\"  # in place of '3E11'" in spoiled
    assert read_cruise_file("cruise.toml", filled(spoiled).encode()).of("a_hy1.csv") is not None
    assert "A zip of casts" in draft_description("a.zip", zipped({"a_ct1.csv": cast_file()}), LIMITS)


@pytest.mark.parametrize(
    ("flags", "scheme"),
    [
        ([2, 2, 3, 9], Scheme.WHP),
        ([1, 1, 4, 9], Scheme.IODE),
        ([0, 1, 1, 5, 8], Scheme.ARGO),
        ([77], Scheme.WHP),
    ],
)
def test_the_scheme_that_flags_seem_to_be_of(flags: list[int], scheme: Scheme) -> None:
    assert guess_scheme(np.array(flags, dtype=float))[0] is scheme


_HEADINGS = st.text(max_size=12) | st.sampled_from(
    ["Lat", "lat", "Longitude (deg)", "NO3 [umol/l]", "Depth (m)", "Pressure", "date", "year", "month", "hour", "Time",
     "QC", "flag_NO3", "Sal", "S", "studyName", "station", "Oxygen (furlongs)", "latitude_minutes", "day of year"]
)  # fmt: skip
_CELLS = st.text(max_size=8) | st.sampled_from(
    ["1", "2.5", "-9", "n.d.", "2009-02-14", "14/2/09", "-999", "", "8:03", '"', "a;b", "\x7f", "#"]
)


@settings(max_examples=150, deadline=None, derandomize=True, suppress_health_check=[HealthCheck.too_slow])
@given(
    headings=st.lists(_HEADINGS, min_size=1, max_size=8),
    rows=st.lists(st.lists(_CELLS, min_size=8, max_size=8), max_size=5),
    delimiter=st.sampled_from([",", ";", "\t", " "]),
)
def test_every_draft_can_be_finished(headings: list[str], rows: list[list[str]], delimiter: str) -> None:
    lines = [delimiter.join(headings), *(delimiter.join(row[: len(headings)]) for row in rows)]
    data = "\n".join(lines).encode("utf-8", errors="replace")
    try:
        draft = draft_description("odd name [1].csv", data, LIMITS)
    except DeliveryProblem:
        return
    said = read_cruise_file("cruise.toml", filled(draft).encode()).of("odd name [1].csv")
    assert said is not None
    reason = ""
    try:
        read_delivery("odd name [1].csv", data, LIMITS, said)
    except DeliveryProblem as problem:
        reason = problem.reason
    assert reason not in {"column-not-there", "no-kind", "no-heading"}


STAMPED = (
    b"station,cast,sample,time,lat,lon,pressure,no3\n"
    b"1,1,8,2009-02-15T03:30:00Z,-30.5,-18.9,5.0,0.24\n1,1,7,2009-02-15T04:30:00Z,-30.5,-18.9,50.0,2.83\n"
)


@pytest.mark.parametrize("form", ["text", "parquet"])
def test_a_column_called_time_that_holds_the_date_is_drafted_as_both(form: str, tmp_path: Path) -> None:
    path = tmp_path / "bottles.csv"
    path.write_bytes(STAMPED)
    if form == "parquet":
        table = pd.read_csv(path, parse_dates=["time"])
        path = tmp_path / "bottles.parquet"
        table.to_parquet(path)
    draft = call("mapping", path).out
    assert entries(draft)["time"] == "date_and_time"
    assert "its cells hold the date too" in draft
    assert "missing where only a date was given" not in draft
    (tmp_path / "cruise.toml").write_text(filled(draft), encoding="utf-8")
    archive = tmp_path / "archive"
    (tmp_path / "inbox").mkdir()
    path.rename(tmp_path / "inbox" / path.name)
    (tmp_path / "cruise.toml").rename(tmp_path / "inbox/cruise.toml")
    assert call("run", tmp_path / "inbox", "--archive", archive).status == 0
    samples = pq.read_table(archive / f"samples/{EXPOCODE}.parquet")
    assert samples.column("time").null_count == 0
    assert samples.column("date").null_count == 0


def test_a_column_called_date_and_time_without_dates_is_drafted_as_the_time() -> None:
    draft = draft_description("x.csv", b"station,datetime,date,no3\n1,03:30,2009-02-15,1\n", LIMITS)
    assert entries(draft)["datetime"] == "time"
