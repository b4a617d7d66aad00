"""Spreadsheets as found: dates as cells, formulas, errors, hidden sheets; nothing lost, nothing unbounded."""

from __future__ import annotations

import datetime as dt
import io
import zipfile

import openpyxl
import pytest

from pipeline.problems import DeliveryProblem
from pipeline.reading import read_delivery
from pipeline.reading.workbook import Shown, shown_by
from pipeline.reading.worksheet import date_text
from pipeline.settings import ReadingSettings
from tests.invented import checks, one
from tests.reading.tables import (
    COLUMNS,
    CRUISE,
    TOML,
    as_workbook,
    description,
    read_table,
    saved,
    written_workbook,
)

SMALL = TOML.partition("[file.columns]")[0] + '[file.columns]\nS = "station"\nP = "pressure"\nN = "nitrate"\n'
PLACE = "[file.constants]\nlatitude = -35.5\nlongitude = -12.25\ndate = 2009-02-14\n"
SMALL = SMALL.replace("[file.constants]\n", PLACE)
HEAD = '<row r="1"><c r="A1" t="s"><v>0</v></c><c r="B1" t="s"><v>1</v></c><c r="C1" t="s"><v>2</v></c></row>'
TEXTS = (
    "<si><t>S</t></si><si><r><t>P</t></r><rPh><t>reading aid</t></rPh></si><si><t>N</t></si>"
    "<si><t>#4 _x0041_</t></si>"
)

SHARED, TRUTH = ' t="s"', ' t="b"'


def small(rows: str, **parts: str) -> bytes:
    return written_workbook(HEAD + rows, texts=TEXTS, **parts)


def number(place: str, value: str, more: str = "") -> str:
    return f'<c r="{place}"{more}><v>{value}</v></c>'


def test_shared_texts_gaps_and_a_size_that_is_wrong() -> None:
    rows = f'<row r="3">{number("A3", "3", SHARED)}{number("B3", "10.5")}</row>'
    rows += (
        f'<row r="900000">{number("A900000", "7")}{number("B900000", "1E3")}{number("C900000", "0.1")}</row>'
    )
    delivery = read_table(small(rows), "cruise.xlsx", text=SMALL)
    assert delivery.table.column("station").to_pylist() == ["#4 A", "7"]
    assert delivery.table.column("line").to_pylist() == [3, 900_000]
    assert delivery.table.column("pressure").to_pylist() == [10.5, 1000.0]
    assert delivery.table.column("nitrate").to_pylist() == [None, 0.1]


def test_truth_errors_and_formulas() -> None:
    rows = (
        f'<row r="2">{number("A2", "1", TRUTH)}<c r="B2"><f>5+5</f><v>10</v></c>'
        '<c r="C2" t="e"><v>#N/A</v></c></row>'
        '<row r="3"><c r="A3" t="str"><f>X</f><v>two</v></c><c r="B3"><v>20</v></c><c r="C3"><f>A1*2</f></c></row>'
    )
    delivery = read_table(small(rows), "cruise.xlsx", text=SMALL)
    assert delivery.table.column("station").to_pylist() == ["TRUE", "two"]
    assert delivery.table.column("pressure").to_pylist() == [10.0, 20.0]
    assert checks(delivery) == ["uncomputed-formula", "unit-assumed", "not-a-number"]
    assert "1 cells hold a formula without its result (C3)" in delivery.findings[0].message
    assert delivery.findings[2].message.startswith("cruise.xlsx, row 2: N is '#N/A'; expected a number")


@pytest.mark.parametrize(
    ("rows", "words"),
    [
        ('<row r="3"><c r="A3"><v>1</v></c></row><row r="2"><c r="A2"><v>1</v></c></row>', "row 2 stands behind row 3"),
        ('<row r="2"><c r="B2"><v>1</v></c><c r="A2"><v>1</v></c></row>', "the cell A2 is out of its order"),
        ('<row r="2"><c r="ZZZ2"><v>1</v></c></row>', "the cell ZZZ2 is out of its order"),
        ('<row r="2"><c r="A2" t="s"><v>99</v></c></row>', "out of range"),
        ('<row r="2"><c r="A2" t="s"><v>-1</v></c></row>', "there is a reference -1"),
        ('<row r="2"><c r="A2"><v>one</v></c></row>', "could not convert"),
        ('<row r="x"/>', "invalid literal"),
        ("<row", "not well-formed"),
    ],
)  # fmt: skip
def test_what_no_spreadsheet_has_is_refused_whole(rows: str, words: str) -> None:
    with pytest.raises(DeliveryProblem, match="the spreadsheet is cut or spoiled") as caught:
        read_table(small(rows), "cruise.xlsx", text=SMALL)
    assert words in str(caught.value)


def test_dates_by_their_style_and_since_1904() -> None:
    dated = SMALL.replace("date = 2009-02-14\n", "").replace('N = "nitrate"', 'N = "date"')
    style = ' s="2"'
    rows = f'<row r="2">{number("A2", "1")}{number("B2", "5")}{number("C2", "39858.335", style)}</row>'
    formats = '<xf numFmtId="0"/><xf numFmtId="170"/><xf numFmtId="171"/>'.replace("xf", "x:xf")
    delivery = read_table(small(rows, formats=formats), "cruise.xlsx", text=dated)
    assert one(delivery, "date") == dt.date(2009, 2, 14)
    other = small(rows, formats=formats, head='<workbookPr date1904="1"/>')
    assert one(read_table(other, "cruise.xlsx", text=dated), "date") == dt.date(2013, 2, 15)


@pytest.mark.parametrize(
    ("code", "shown"),
    [
        ("0.00", Shown.NUMBER), ("General", Shown.NUMBER), ('0.0"days"', Shown.NUMBER), ("[Red]0;-0", Shown.NUMBER),
        ("yyyy-mm-dd", Shown.DATE), ("d-mmm", Shown.DATE), ("[$-409]mmm yy", Shown.DATE), ("hh:mm", Shown.TIME),
        ("[h]:mm:ss", Shown.TIME), ("m/d/yy h:mm", Shown.BOTH), ("0.0\\d", Shown.NUMBER), ("@", Shown.NUMBER),
    ],
)  # fmt: skip
def test_what_a_number_format_shows(code: str, shown: Shown) -> None:
    assert shown_by(code) is shown


@pytest.mark.parametrize(
    ("serial", "shown", "text"),
    [
        (1.0, Shown.DATE, "1900-01-01"), (59.0, Shown.DATE, "1900-02-28"), (61.0, Shown.DATE, "1900-03-01"),
        (39858.0, Shown.DATE, "2009-02-14"), (39858.0, Shown.BOTH, "2009-02-14T00:00:00"),
        (39858.335416666666, Shown.DATE, "2009-02-14T08:03:00"), (0.335416666666, Shown.TIME, "08:03:00"),
        (39858.335416666666, Shown.TIME, "2009-02-14T08:03:00"), (-1.0, Shown.DATE, -1.0), (3e6, Shown.BOTH, 3e6),
    ],
)  # fmt: skip
def test_days_of_a_spreadsheet(serial: float, shown: Shown, text: float | str) -> None:
    assert date_text(serial, shown, since_1904=False) == text


def test_headings_over_two_rows_a_title_and_blank_rows() -> None:
    book = openpyxl.Workbook()
    sheet = book.active
    assert sheet is not None
    sheet["A1"] = "The invented cruise"
    sheet.merge_cells("A1:F1")
    sheet["M2"] = "Chemistry"
    sheet.merge_cells("M2:P2")
    for column, name in enumerate(COLUMNS, start=1):
        sheet.cell(3, column, name)
    for row, sample in enumerate(CRUISE, start=5):
        for column, cell in enumerate(sample.cells, start=1):
            sheet.cell(row + (row > 6), column, cell)
    sheet["A20"] = "Note: do not cite"
    delivery = read_table(saved(book), "cruise.xlsx", "names_line = 3")
    assert delivery.table.column("line").to_pylist() == [5, 6, 8, 9]
    (reject,) = delivery.rejects
    assert (reject.line, reject.raw.strip()) == (20, "Note: do not cite")


def test_the_sheet_is_the_one_that_can_be_seen_or_is_named() -> None:
    book = openpyxl.load_workbook(io.BytesIO(as_workbook()))
    hidden = book.create_sheet("Old")
    hidden.sheet_state = "hidden"
    assert read_table(saved(book), "cruise.xlsx").rows == 4
    book.create_sheet("Notes")
    with pytest.raises(
        DeliveryProblem, match=r"found the sheets 'Bottles', 'Old' \(hidden\), 'Notes'; expected one sheet"
    ):
        read_table(saved(book), "cruise.xlsx")
    assert read_table(saved(book), "cruise.xlsx", 'sheet = "Bottles"').rows == 4
    with pytest.raises(DeliveryProblem, match="found no sheet 'Bottle' but 'Bottles'"):
        read_table(saved(book), "cruise.xlsx", 'sheet = "Bottle"')
    with pytest.raises(DeliveryProblem, match="there is nothing in row 1 of the sheet 'Notes'"):
        read_table(saved(book), "cruise.xlsx", 'sheet = "Notes"')


def test_a_value_that_became_a_date_is_told() -> None:
    rows = [*CRUISE]
    book = openpyxl.load_workbook(io.BytesIO(as_workbook(rows)))
    sheet = book["Bottles"]
    sheet.cell(2, COLUMNS.index("Nitrate") + 1, dt.datetime(2026, 5, 1))  # noqa: DTZ001 - spreadsheets know no zone
    delivery = read_table(saved(book), "cruise.xlsx")
    assert checks(delivery) == ["not-a-number"]
    assert "row 2: Nitrate is '2026-05-01T00:00:00'" in delivery.findings[0].message


def test_bombs_are_refused_before_they_go_off() -> None:
    zeros = io.BytesIO()
    with (
        zipfile.ZipFile(io.BytesIO(as_workbook())) as old,
        zipfile.ZipFile(zeros, "w", zipfile.ZIP_DEFLATED) as new,
    ):
        for member in old.namelist():
            new.writestr(member, old.read(member))
        new.writestr("xl/more.xml", b"0" * 30_000_000)
    limits = ReadingSettings(unpacked_bytes=20_000_000)
    with pytest.raises(
        DeliveryProblem, match=r"the spreadsheet unpacks to 0\.0 GB; expected at most 0\.0 GB"
    ):
        read_delivery("cruise.xlsx", zeros.getvalue(), limits, description())
    many = small("".join(f'<row r="{i}"><c r="A{i}"><v>1</v></c></row>' for i in range(2, 3000)))
    with pytest.raises(DeliveryProblem, match="found at least 101 cells; expected at most 100"):
        read_delivery("cruise.xlsx", many, ReadingSettings(cells=100), description(text=SMALL))
    with pytest.raises(DeliveryProblem, match="found 16384 columns; expected at most 2000"):
        read_table(small('<row r="2"><c r="XFD2"><v>1</v></c></row>'), "cruise.xlsx", text=SMALL)
    entity = '<!DOCTYPE a [<!ENTITY b "bbbb">]>'
    with pytest.raises(DeliveryProblem, match="it defines words of its own"):
        read_table(_with_part(small(""), "xl/worksheets/one.xml", entity), "cruise.xlsx", text=SMALL)


def _with_part(data: bytes, member: str, before: str) -> bytes:
    buffer = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(data)) as old, zipfile.ZipFile(buffer, "w") as new:
        for name in old.namelist():
            new.writestr(name, before.encode() * (name == member) + old.read(name))
    return buffer.getvalue()


@pytest.mark.parametrize("member", ["xl/_rels/workbook.xml.rels", "xl/worksheets/one.xml"])
def test_a_part_that_is_not_there(member: str) -> None:
    buffer = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(small(""))) as old, zipfile.ZipFile(buffer, "w") as new:
        for name in old.namelist():
            if name != member:
                new.writestr(name, old.read(name))
    with pytest.raises(DeliveryProblem, match="the spreadsheet is cut or spoiled"):
        read_table(buffer.getvalue(), "cruise.xlsx", text=SMALL)


def test_the_old_kind_is_refused_with_what_to_do() -> None:
    with pytest.raises(
        DeliveryProblem, match=r"a spreadsheet of the old kind \(\.xls\), or one that is locked"
    ):
        read_table(b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + b"\0" * 600, "cruise.xls")


def test_without_a_description() -> None:
    with pytest.raises(DeliveryProblem, match=r"seawhence mapping cruise\.xlsx"):
        read_delivery("cruise.xlsx", as_workbook(), ReadingSettings())
