"""What a reader had to assume of a text is told: its letters, its decimal sign."""

from __future__ import annotations

import pytest

from pipeline.findings import Severity
from pipeline.problems import DeliveryProblem
from pipeline.reading import Delivery, read_cruise_file, read_delivery
from tests.invented import EXPOCODE, LIMITS, bottle_file, checks, read
from tests.reading.tables import COLUMNS, CRUISE, description, saved

HEAD = f"""\
[[file]]
files = "*"
kind = "bottle"
[file.constants]
expocode = "{EXPOCODE}"
station = "1"
latitude = -35.5
longitude = -12.25
date = 2009-02-14
[file.columns]
p = {{ quantity = "pressure", unit = "dbar" }}
t = {{ quantity = "temperature", unit = "ITS-90" }}
"""


def table(data: bytes, name: str = "x.csv", text: str = HEAD) -> Delivery:
    return read_delivery(name, data, LIMITS, read_cruise_file("cruise.toml", text.encode()).of(name))


def told(delivery: Delivery, check: str) -> str:
    (finding,) = [f for f in delivery.findings if f.check == check]
    return finding.message


def test_letters_that_are_not_utf_8_are_told() -> None:
    data = bottle_file({"SECT_ID": "Süd"}).decode().encode("latin-1")
    delivery = read(data)
    assert told(delivery, "encoding-assumed") == (
        "cruise_hy1.csv, line 4: found letters that are not UTF-8; they were read as Latin-1, such as 'Süd'."
    )
    assert delivery.findings[0].severity is Severity.NOTE
    assert "encoding-assumed" in checks(table("p,t,ü\n10,4,1\n".encode("latin-1")))
    said = HEAD.replace('kind = "bottle"', 'kind = "bottle"\nencoding = "latin-1"')
    assert "encoding-assumed" not in checks(table("p,t,ü\n10,4,1\n".encode("latin-1"), text=said))
    assert "encoding-assumed" not in checks(read(bottle_file({"SECT_ID": "Süd"})))


def test_a_decimal_comma_that_was_assumed_is_told() -> None:
    data = bottle_file({}).replace(b",", b";").replace(b".", b",")
    delivery = read(data)
    assert told(delivery, "decimal-comma-assumed") == (
        "cruise_hy1.csv, line 4: its cells are parted by semicolons; commas in numbers were read as decimal signs, such"
        " as '-35,5000'."
    )
    assert "decimal-comma-assumed" not in checks(read(bottle_file({}).replace(b",", b";")))


def test_a_column_of_decimal_commas_is_one_sentence_with_what_to_do() -> None:
    delivery = table(b"p;t\n10;4,0\n20;3,5\n30;3\n")
    assert told(delivery, "decimal-comma") == (
        "x.csv, line 2: t is '4,0' (and in 1 more row a number with a comma); expected a number; they count as missing;"
        ' write decimal = "," in cruise.toml, line 1, if the comma is the decimal sign.'
    )
    assert checks(delivery).count("not-a-number") == 0
    assert delivery.table.column("temperature").null_count == 2


def test_a_workbook_with_decimal_commas_as_text_is_told_the_same() -> None:
    import openpyxl  # noqa: PLC0415

    book = openpyxl.Workbook()
    sheet = book.active
    assert sheet is not None
    sheet.append(COLUMNS)
    for row in CRUISE:
        cells = enumerate(row.cells)
        sheet.append([str(c).replace(".", ",") if isinstance(c, float) and i > 9 else c for i, c in cells])
    delivery = read_delivery("cruise.xlsx", saved(book), LIMITS, description())
    commas = [f for f in delivery.findings if f.check == "decimal-comma"]
    assert {f.variable for f in commas} >= {"temperature", "bottle_salinity", "bottle_oxygen"}
    assert len(commas) == len({f.variable for f in commas})
    assert all('write decimal = "," in cruise.toml' in f.message for f in commas)


def test_a_pressure_with_a_decimal_comma_names_the_line_of_cruise_toml_that_mends_it() -> None:
    with pytest.raises(DeliveryProblem) as caught:
        table(b"p;t\n5,0;4\n10,0;4\n")
    assert "the pressure (p) is '5,0'; expected a number of decibars" in str(caught.value)
    assert 'write decimal = "," in cruise.toml, line 1' in str(caught.value)
    some = table(b"p;t\n5,0;4\n10;4\n")
    (reject,) = some.rejects
    assert 'write decimal = "," in cruise.toml, line 1' in reject.message
    assert "cruise.toml" not in reject.to_group
