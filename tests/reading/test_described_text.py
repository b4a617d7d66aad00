"""Delimited text as found: preambles, quotes, wrong widths, encodings, blanks for delimiters."""

from __future__ import annotations

import pytest

from pipeline.problems import DeliveryProblem
from pipeline.reading import read_delivery
from tests.invented import LIMITS, checks, one
from tests.reading.tables import CRUISE, as_text, read_table

ROWS = as_text().decode().splitlines()


def text(*lines: str) -> bytes:
    return "\n".join(lines).encode()


def test_preamble_units_and_comments() -> None:
    units = ",".join({"Oxygen": "ml/l"}.get(name, "") for name in ROWS[0].split(","))
    data = text(
        "Nutrients of the invented sea",
        "",
        ROWS[0],
        units,
        "",
        ROWS[1],
        "# a note, of the chemist",
        ROWS[2],
        "",
    )
    toml = 'names_line = 3\nunits_line = 4\ncomment = "#"'
    delivery = read_table(data, "cruise.txt", toml)
    assert delivery.table.column("line").to_pylist() == [6, 8]
    assert delivery.rows == 2


def test_a_row_of_a_wrong_width_is_rejected_with_its_text() -> None:
    delivery = read_table(text(*ROWS[:3], f"{ROWS[3]},7", ROWS[4][:20], ROWS[1]), "cruise.txt")
    assert delivery.table.num_rows == 3
    assert [(r.line, r.reason, r.raw) for r in delivery.rejects] == [
        (4, "field-count", f"{ROWS[3]},7"),
        (5, "field-count", ROWS[4][:20]),
    ]
    assert "found 17 fields; expected 16, one for each column name" in delivery.rejects[0].message


def test_delimiters_at_the_end_of_lines_are_no_fields() -> None:
    delivery = read_table(text(*(f"{row},,," for row in ROWS)), "cruise.txt")
    assert delivery.rows == delivery.table.num_rows == 4


def test_quoted_cells_hold_delimiters_and_line_ends() -> None:
    quoted = [row.replace("2; deep", '"2, deep\nand dark"') for row in ROWS]
    delivery = read_table(text(*quoted), "cruise.txt")
    assert delivery.table.column("station").to_pylist() == ["1", "1", "2, deep and dark", "2, deep and dark"]
    assert delivery.table.column("line").to_pylist() == [2, 3, 4, 6]


def test_a_quote_that_is_never_closed_takes_no_other_row_with_it() -> None:
    delivery = read_table(text(*ROWS[:2], f'"{ROWS[2]}', *ROWS[3:]), "cruise.txt")
    assert delivery.rows == 4
    assert [reject.line for reject in delivery.rejects] == [3]


def test_two_marks_of_inches_join_no_lines() -> None:
    inches = [ROWS[0], *(row.replace("V01", "V01").replace("2; deep", '5" net') for row in ROWS[1:])]
    delivery = read_table(text(*inches), "cruise.txt")
    assert delivery.rows == delivery.table.num_rows == 4
    assert one(delivery, "station", 3) == '5" net'


def test_blanks_for_delimiters() -> None:
    names = [name.replace(" ", "_") for name in ROWS[0].split(",")]
    rows = ["   ".join(row.replace("2; deep", "2").replace(",,", ",-999,").split(",")) for row in ROWS[1:]]
    data = text("  ".join(names), *(f"  {row}\t" for row in rows))
    toml = 'delimiter = "blank"'
    with pytest.raises(DeliveryProblem, match=r"there is no column 'QC O2' \(line \d+\), 'QC NO3'"):
        read_table(data, "cruise.txt", toml)
    found = read_table(data.replace(b"QC_O2", b'"QC O2"').replace(b"QC_NO3", b'"QC NO3"'), "cruise.txt", toml)
    assert found.table.column("pressure").to_pylist() == [row.pressure for row in CRUISE]


def test_the_encoding_that_is_said() -> None:
    data = as_text().decode().replace("2; deep", "Größe").encode("utf-16-le")
    delivery = read_table(data, "cruise.txt", 'encoding = "utf-16-le"')
    assert one(delivery, "station", 2) == "Größe"
    with pytest.raises(DeliveryProblem, match="found bytes that are no ascii text"):
        read_table("Größe".encode(), "cruise.txt", 'encoding = "ascii"')


def test_latin_1_is_read_without_a_word() -> None:
    data = as_text().decode().replace("2; deep", "Größe").encode("latin-1")
    assert one(read_table(data, "cruise.txt"), "station", 2) == "Größe"


def test_the_second_column_of_a_name_has_a_name() -> None:
    lines = [ROWS[0].replace("QC NO3", "QC O2"), *ROWS[1:]]
    with pytest.raises(
        DeliveryProblem, match=r"there is no column 'QC NO3' .* found .*'QC O2', 'Nitrate', 'QC O2 \(2\)'"
    ):
        read_table(text(*lines), "cruise.txt")


def test_a_line_that_is_not_there() -> None:
    with pytest.raises(
        DeliveryProblem, match=r"found 6 lines; expected the column names on line 9, as cruise\.toml says"
    ):
        read_table(as_text(), "cruise.txt", "names_line = 9")
    with pytest.raises(DeliveryProblem, match="there are no data rows"):
        read_table(text(ROWS[0]), "cruise.txt")


def test_too_many_columns() -> None:
    with pytest.raises(DeliveryProblem, match=f"found 5000 columns; expected at most {LIMITS.columns}"):
        read_table(b",".join(b"%d" % i for i in range(5000)), "cruise.txt")


def test_a_decimal_comma_that_is_not_said_is_told_and_no_number_is_guessed() -> None:
    data = as_text(delimiter=";", decimal=",")
    with pytest.raises(DeliveryProblem, match=r"the pressure \(Pressure\) is '10,25'; expected a number"):
        read_table(data, "cruise.txt", 'delimiter = ";"')


def test_words_for_missing() -> None:
    rows = [ROWS[0], ROWS[1].replace(",0.1,", ",lost,"), ROWS[2].replace("200.1", "-9"), ROWS[3], ROWS[4]]
    delivery = read_table(text(*rows), "cruise.txt", 'missing = [-9, "lost"]')
    assert delivery.table.column("nitrate").to_pylist()[0] is None
    assert delivery.table.column("bottle_oxygen").to_pylist()[1] is None
    assert not delivery.findings


def test_a_number_for_missing_takes_no_position() -> None:
    rows = [ROWS[0], *(row.replace("-12.25", "-9") for row in ROWS[1:])]
    delivery = read_table(text(*rows), "cruise.txt", "missing = [-9]")
    assert delivery.table.column("longitude").to_pylist() == [-9.0] * 4


def test_a_value_that_is_no_number_is_told_under_its_own_name() -> None:
    delivery = read_table(text(ROWS[0], ROWS[1].replace(",0.1,", ",3o.1,"), *ROWS[2:]), "cruise.txt")
    (finding,) = delivery.findings
    assert (
        finding.message == "cruise.txt, line 2: Nitrate is '3o.1'; expected a number; it counts as missing."
    )
    assert checks(delivery) == ["not-a-number"]


def test_a_table_whose_first_column_is_called_bottle_is_no_exchange_file() -> None:
    order = [3, *range(3), *range(4, 16)]
    rows = [",".join(row.split(",")[i] for i in order) for row in ROWS]
    assert rows[0].startswith("Bottle,Station")
    assert read_table(text(*rows), "cruise.csv").table.num_rows == 4


def test_a_format_that_nobody_knows_is_refused_with_what_was_tried() -> None:
    with pytest.raises(DeliveryProblem) as caught:
        read_delivery("cruise.csv", as_text(), LIMITS)
    assert str(caught.value) == (
        "cruise.csv, line 1: found 'Station,Cast,Sample,Bottle,Day,Clock,Lat,Lon,Bottom,Pressure'; expected a line that"
        " starts with BOTTLE or CTD; it is no NetCDF, no zip, no spreadsheet and no Parquet file either, and no"
        " cruise.toml beside it describes it; `seawhence mapping cruise.csv` drafts one; or remove the file from the"
        " inbox."
    )
