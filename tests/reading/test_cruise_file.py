"""What a cruise.toml may say, and the sentences for what it may not."""

from __future__ import annotations

import contextlib
import pickle
import re
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.problems import DeliveryProblem
from pipeline.reading import CruiseFile, DeliveryKind, read_cruise_file
from pipeline.reading.cruise_form import COLUMN_KEYS, CRUISE_KEYS, DELIMITERS, FILE_KEYS, FILE_TABLES
from pipeline.reading.description import DATE_PARTS, ColumnEntry, Layout
from pipeline.reading.schemes import Scheme

ROOT = Path(__file__).parent.parent.parent
FULL = """\
[cruise]
stands = ["edition2_hy1.csv"]

[[file]]
files = "nutrients.csv"
kind = "bottle"
delimiter = "semicolon"
decimal = ","
names_line = 3
units_line = 4
missing = [-9, "n.d."]
flags = "iode"
time_zone = "+02:00"
[file.constants]
expocode = "ZZV120090214"
date = 2009-02-14
latitude = -35.5
[file.joined]
station = ["Leg", "Stop"]
[file.columns]
"Depth (m)" = "depth"
"NO3, umol" = { quantity = "nitrate", unit = "umol/l", flag = "Q", flags = "argo", missing = "lost" }
Time = { quantity = "time", format = "hh.mm" }

[[file]]
files = "*.xlsx"
sheet = "Bottles"
"""


def cruise(text: str) -> CruiseFile:
    return read_cruise_file("cruise.toml", text.encode())


def fault(text: str) -> str:
    with pytest.raises(DeliveryProblem) as caught:
        cruise(text)
    assert caught.value.reason == "unusable-description"
    assert "\n" not in str(caught.value)
    return str(caught.value)


def test_all_that_can_be_said() -> None:
    said = cruise(FULL)
    assert said.stands == ("edition2_hy1.csv",)
    first = said.of("nutrients.csv")
    assert first is not None
    assert first.kind is DeliveryKind.BOTTLE
    assert first.layout == Layout(
        delimiter=";", decimal=",", names_line=3, units_line=4, missing=("-9", "n.d.")
    )
    assert first.constants == {"expocode": "ZZV120090214", "date": "2009-02-14", "latitude": "-35.5"}
    assert first.joined == {"station": ("Leg", "Stop")}
    assert first.time_zone == 120
    assert first.columns == (
        ColumnEntry("Depth (m)", "depth", flag_scheme=Scheme.IODE, line=21),
        ColumnEntry("NO3, umol", "nitrate", "umol/l", "Q", Scheme.ARGO, ("lost",), line=22),
        ColumnEntry("Time", "time", flag_scheme=Scheme.IODE, format="hh.mm", line=23),
    )


def test_a_name_goes_before_a_pattern() -> None:
    said = cruise('[[file]]\nfiles = "*.csv"\n[[file]]\nfiles = "a.csv"\n[[file]]\nfiles = "a.*"\n')
    assert [found.files for name in ("a.csv", "b.csv", "a.txt") if (found := said.of(name))] == [
        "a.csv", "*.csv", "a.*",
    ]  # fmt: skip
    assert said.of("b.txt") is None


def test_it_travels_between_processes() -> None:
    assert pickle.loads(pickle.dumps(cruise(FULL))) == cruise(FULL)  # noqa: S301 - our own


def test_windows_writes_it_with_a_mark_and_other_line_ends() -> None:
    data = b"\xef\xbb\xbf" + FULL.replace("\n", "\r\n").encode()
    assert read_cruise_file("cruise.toml", data) == cruise(FULL)


FILE = '[[file]]\nfiles = "a.csv"\n'


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("[[file]\n", "cruise.toml, line 1: found text that is not TOML"),
        ("", "found nothing in it; expected at least one table [[file]]"),
        ("[[fil]]\n", "line 1: found the unknown key 'fil' in the file (did you mean file?)"),
        ("file = 3\n", "line 1: found 3 as 'file'; expected tables [[file]]"),
        ("[[file]]\nkind = 'bottle'\n", "line 1: found no 'files' in [[file]] 1"),
        (FILE + "knd = 'ctd'\n", "line 3: found the unknown key 'knd' in [[file]] of a.csv (did you mean kind?)"),
        (FILE + "kind = 'net'\n", "line 3: found 'net' as 'kind'; expected \"bottle\" or \"ctd\""),
        (FILE + "names_line = 0\n", "line 3: found 0 as 'names_line'; expected a line, counted from 1"),
        (FILE + "encoding = 'utf9'\n", "line 3: found 'utf9' as 'encoding'"),
        (FILE + "time_zone = 'CET'\n", "line 3: found 'CET' as 'time_zone'; expected hours ahead of UTC"),
        (FILE + "names_line = 4\nfirst_line = 4\n", "line 3: found names_line = 4 and first_line = 4"),
        (FILE + "decimal = ','\ndelimiter = 'comma'\n", "line 3: found ',' both as decimal sign and as delimiter"),
        (FILE + FILE, "line 4: found a second [[file]] of 'a.csv'"),
        (
            FILE + '[file.columns]\n"NO3" = "nitrat"\n',
            "line 4: found the unknown quantity 'nitrat' for the column 'NO3'; did you mean nitrate (Nitrate)?",
        ),
        (
            FILE + '[file.columns]\nA = "silicte"\n',
            "did you mean silicate (Silicic acid)?",
        ),
        (
            FILE + '[file.columns]\nA = "nitrate"\nB = { quantity = "nitrate" }\n',
            "line 5: found nitrate both in column 'A' and in 'B'",
        ),
        (
            FILE + '[file.columns]\n"A (x)" = { quantity = "nitrate", unit = "furlongs" }\n',
            "line 4: found the unit 'furlongs' for nitrate; expected UMOL/KG",
        ),
        (FILE + '[file.columns]\nA = { unit = "m" }\n', "line 4: found no 'quantity' for the column 'A'"),
        (FILE + "[file.columns]\nA = 3\n", "line 4: found 3 as 'A'; expected a quantity"),
        (
            FILE + '[file.columns]\nA = { quantity = "nitrate", flag = "B" }\nB = "phosphate"\n',
            "line 4: found the column 'B' as flags of 'A' and as a quantity",
        ),
        (
            FILE + '[file.columns]\nA = { quantity = "latitude", flag = "B" }\n',
            "line 4: found flags for latitude, which has none",
        ),
        (
            FILE + '[file.columns]\nA = { quantity = "nitrate", flags = "woce" }\n',
            "line 4: found 'woce' as 'flags'; expected \"whp\" or \"iode\" or \"qartod\" or \"argo\"",
        ),
        (
            FILE + '[file.columns]\nA = { quantity = "nitrate", format = "DD.MM.YYYY" }\n',
            "line 4: found a format for nitrate",
        ),
        (
            FILE + '[file.columns]\nA = { quantity = "date", format = "hh:mm" }\n',
            "line 4: found the format 'hh:mm' for date",
        ),
        (FILE + "[file.constants]\nexpocode = '3E+11'\n", "line 4: found expocode = '3E+11'; expected a cruise code"),
        (FILE + "[file.constants]\nstation = 'FILL IN'\n", "line 4: station is still 'FILL IN', as the draft has it;"),
        (FILE + "[file.constants]\nlatitude = 95.0\n", "line 4: found latitude = '95.0'; expected a number from -90"),
        (FILE + "[file.constants]\ndate = '20090230'\n", "line 4: found date = '20090230'; expected a date YYYY-MM-DD"),
        (FILE + "[file.constants]\ncast = 1.5\n", "line 4: found cast = '1.5'; expected a number from 0 to 1e+06"),
        (FILE + "[file.constants]\nnitrate = 3\n", "line 4: found the unknown constant 'nitrate'"),
        (
            FILE + "[file.constants]\nstation = 3\n[file.columns]\nA = 'station'\n",
            "line 4: found station as a constant and elsewhere for [[file]] of a.csv; expected it once",
        ),
        (
            FILE + '[file.columns]\nA = "pressure"\nB = "depth"\n',
            "line 5: found both pressure and depth, which give the same",
        ),
        (FILE + '[file.columns]\nA = "month"\n', "line 4: found month without year"),
        (FILE + '[file.columns]\nA = "latitude_minutes"\n', "line 4: found latitude_minutes without latitude_degrees"),
        (FILE + '[file.joined]\nnitrate = ["A"]\n', "line 4: found 'nitrate' to be joined of columns"),
        ("[cruise]\nstands = 'a'\n", "line 2: found 'a' as 'stands'; expected a list of file names"),
    ],
)  # fmt: skip
def test_faults_are_told_with_their_line(text: str, words: str) -> None:
    assert words in fault(text)


def test_all_faults_are_told_at_once_in_the_order_of_the_lines() -> None:
    said = fault(FILE + 'kind = "net"\nsheets = 1\n[file.columns]\n"N (2)" = "nitrogen-ish"\n')
    assert said.startswith("cruise.toml: 3 things are wrong in it: line 3: ")
    assert said.index("line 3") < said.index("line 4") < said.index("line 6")


@settings(max_examples=150, deadline=None, derandomize=True)
@given(at=st.integers(0, len(FULL)), junk=st.text(max_size=6), cut=st.integers(0, 20))
def test_a_spoiled_one_is_read_or_refused(at: int, junk: str, cut: int) -> None:
    with contextlib.suppress(DeliveryProblem):
        cruise(FULL[:at] + junk + FULL[at + cut :])


@pytest.mark.parametrize(
    "data",
    [b"\xff\xfe\x00", b"a = " + b"[" * 100_000, b"x" * 1_100_000, b"[file]\ncolumns = 3\n", b"file = [3]\n"],
)
def test_what_is_no_description_at_all(data: bytes) -> None:
    with pytest.raises(DeliveryProblem):
        read_cruise_file("cruise.toml", data)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ('[[file]]\nfiles = "x"\n[file.columns]\nNO3 = "nitrate"\nNO3 = "nitrite"\n',
         "cruise.toml, line 5: found 'NO3' a second time in the same table; expected each name once; remove one of the"
         " two."),
        ('[[file]]\nfiles = "x"\n[file.columns]\n"NO3 x" = "nitrate"\n"NO3 x" = "nitrite"\n',
         "line 5: found 'NO3 x' a second time in the same table"),
        ('[[file]]\nfiles = "x"\n[file.columns]\nA = "nitrate"\n[file.columns]\nB = "nitrite"\n',
         "line 5: found the table [file.columns] a second time; expected it once for each [[file]]; join the two."),
        ('[cruise]\nstands = ["x"]\n[cruise]\n', "line 3: found the table [cruise] a second time"),
    ],
)  # fmt: skip
def test_what_stands_twice_is_told_as_such(text: str, words: str) -> None:
    assert words in fault(text)


def test_a_blank_of_a_draft_that_was_left_is_told_with_an_example() -> None:
    head = '[[file]]\nfiles = "x"\n[file.constants]\n'
    assert fault(f'{head}expocode = "FILL IN"\n') == (
        "cruise.toml, line 4: expocode is still 'FILL IN', as the draft has it; expected the code of the cruise, such"
        " as ZZV120090214; write it there, or give it by a column."
    )
    assert (
        "latitude is still 'FILL IN', as the draft has it; expected degrees north, such as -35.5;"
        in fault(f'{head}latitude = "FILL IN"\n')
    )


def test_the_readme_tells_of_every_key() -> None:
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    section = readme.partition("### Tables of your own")[2].partition("\n## ")[0]
    keys = [*CRUISE_KEYS, *FILE_KEYS, *FILE_TABLES, *COLUMN_KEYS, *DELIMITERS, *DATE_PARTS]
    letters = ["YYYY", "YY", "MMM", "MM", "DDD", "DD", "hh", "mm", "ss"]
    assert [key for key in keys if not re.search(rf"\b{key}\b", section)] == []
    assert [letter for letter in letters if f"`{letter}`" not in section] == []
